//! How much people are told: the figures by which a plant judges its own notices.
//!
//! Published guidance, from memory where no open source is at hand (ISA-18.2 and EEMUA 191): about 150
//! notices a day and one in ten minutes is the most a person handles, over 300 a day is too much; ten in
//! ten minutes is a flood; one that stands for over 24 hours is stale; one that comes and goes three
//! times in an hour chatters.

use std::collections::BTreeMap;

use crate::model::{Time, US_PER_DAY, US_PER_S};
use crate::notice::{Kind, State};

use super::BankView;

const HOUR_US: i64 = 3600 * US_PER_S;
const TEN_MINUTES_US: i64 = 600 * US_PER_S;

/// Raised this often within an hour, a kind of a bank chatters.
const CHATTERS: usize = 3;

/// Raised within ten minutes, so many are a flood.
const FLOOD: usize = 10;

/// The figures.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Load {
    /// Raised within the last day.
    pub last_day: usize,
    /// Raised within the last ten minutes.
    pub last_ten_minutes: usize,
    /// Kinds of banks that chatter.
    pub chattering: usize,
    /// Conditions that hold, whoever has set them aside.
    pub standing: usize,
    /// Of these, those raised more than 24 hours ago.
    pub stale: usize,
    /// Set aside by a person.
    pub shelved: usize,
}

impl Load {
    /// The most that one person handles in a day, by published guidance.
    pub const MOST_A_DAY: usize = 150;

    /// Over these banks.
    pub fn of<'a>(banks: impl IntoIterator<Item = &'a BankView>, now: Time) -> Self {
        banks.into_iter().fold(Self::default(), |sum, bank| {
            let one = Self::of_bank(bank, now);
            Self {
                last_day: sum.last_day + one.last_day,
                last_ten_minutes: sum.last_ten_minutes + one.last_ten_minutes,
                chattering: sum.chattering + one.chattering,
                standing: sum.standing + one.standing,
                stale: sum.stale + one.stale,
                shelved: sum.shelved + one.shelved,
            }
        })
    }

    fn of_bank(bank: &BankView, now: Time) -> Self {
        let within = |us: i64| {
            let raised = bank.raised_at.iter();
            raised.filter(move |r| r.at <= now && now.us_since(r.at) < us)
        };
        let mut hourly: BTreeMap<Kind, usize> = BTreeMap::new();
        for raised in within(HOUR_US) {
            *hourly.entry(raised.kind).or_default() += 1;
        }
        let holds = || bank.open.iter().filter(|n| n.holds());
        let old = |at: Time| now.us_since(at) > US_PER_DAY;
        let aside = |s: State| matches!(s, State::Shelved | State::OutOfService);
        Self {
            last_day: within(US_PER_DAY).count(),
            last_ten_minutes: within(TEN_MINUTES_US).count(),
            chattering: hourly.values().filter(|n| **n >= CHATTERS).count(),
            standing: holds().count(),
            stale: holds().filter(|n| old(n.raised)).count(),
            shelved: bank.open.iter().filter(|n| aside(n.state)).count(),
        }
    }

    /// Whether there are more at once than anybody reads.
    pub const fn is_flood(&self) -> bool {
        self.last_ten_minutes >= FLOOD
    }
}
