//! The sentences of notices that are conditions: silent, stuck, clock, intake, level below declared.
//!
//! The subject fits a lock screen; the text says what, since when, and what to do.

use jiff::tz::TimeZone;
use serde::{Deserialize, Serialize};

use crate::model::{Bank, Name, Time, US_PER_S, fixed};

use super::{Kind, MOST_SUBJECT, NamedSource, Priority, Words};

/// More names than this are counted instead of listed.
const MOST_NAMES: usize = 6;

/// What is wrong, with the figures that show it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Detail {
    /// Nothing has arrived since.
    Silent,
    /// The same value, so many times in a row.
    Stuck {
        /// The value, in the bank's unit.
        value: f64,
        /// How often.
        times: u64,
    },
    /// Values are taken later than they are received, by so many microseconds.
    Ahead {
        /// The median of the newest.
        by_us: i64,
    },
    /// Values are refused for their time, so many in a row.
    Refused {
        /// How often.
        times: u64,
    },
    /// The bank's mean and its upper 99.9 % limit, in the bank's unit.
    Below {
        /// Mean of all sources over the longest span.
        mean: f64,
        /// Upper limit.
        upper: f64,
    },
    /// What the part in trouble says.
    Intake(String),
}

/// One source in trouble, or the bank.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Trouble {
    /// The source; `None` where it is the bank's or the plant's.
    pub source: Option<Name>,
    /// Since when.
    pub since: Time,
    /// What is wrong.
    pub detail: Detail,
}

impl Trouble {
    /// As a named source, with one figure in the unit of [`unit`].
    fn named(&self, now: Time) -> Option<NamedSource> {
        let figure = match self.detail {
            Detail::Silent => seconds(now.us_since(self.since)),
            Detail::Stuck { times, .. } | Detail::Refused { times } => times as f64,
            Detail::Ahead { by_us } => seconds(by_us),
            Detail::Below { .. } | Detail::Intake(_) => return None,
        };
        Some(NamedSource {
            source: self.source.clone()?,
            deviation: figure,
            low: figure,
            high: figure,
        })
    }
}

fn seconds(us: i64) -> f64 {
    us as f64 / US_PER_S as f64
}

/// What the words are made from.
pub struct ConditionFacts<'a> {
    /// The bank.
    pub bank: &'a Bank,
    /// The zone people live in.
    pub zone: &'a TimeZone,
    /// Which condition.
    pub kind: Kind,
    /// What is wrong; at the return, what was.
    pub troubles: &'a [Trouble],
    /// How many sources the bank has.
    pub of: usize,
    /// Now.
    pub now: Time,
    /// When it was seen to be gone.
    pub returned: Option<Time>,
    /// The page.
    pub url: &'a str,
}

impl ConditionFacts<'_> {
    /// The sources named, in the order of the bank.
    pub fn sources(&self) -> Vec<NamedSource> {
        let all = self.troubles.iter();
        all.filter_map(|t| t.named(self.now)).collect()
    }

    /// The unit of the figures of [`ConditionFacts::sources`].
    pub fn unit(&self) -> Name {
        let unit = match (self.kind, self.troubles.first().map(|t| &t.detail)) {
            (Kind::SourceStuck, _) => "times the same value",
            (Kind::ClockWrong, Some(Detail::Refused { .. })) => "values refused",
            (Kind::SourceSilent | Kind::ClockWrong, _) => "s",
            _ => return self.bank.characteristic.unit.clone(),
        };
        unit.into()
    }

    /// By consequence: without measurements nobody is watched, and short packs leave the plant.
    pub fn priority(&self) -> Priority {
        match self.kind {
            Kind::LevelBelowDeclared | Kind::IntakeTrouble => Priority::High,
            Kind::SourceSilent if self.is_whole_bank() => Priority::Medium,
            Kind::SourceSilent | Kind::ClockWrong => Priority::Low,
            _ => Priority::Medium,
        }
    }

    fn is_whole_bank(&self) -> bool {
        self.of > 1 && self.troubles.len() == self.of
    }

    /// Puts it into words.
    pub fn words(&self) -> Words {
        let advice = self.advice();
        let mut lines = vec![format!("{}.", self.headline(&self.names()))];
        lines.extend(self.troubles.iter().filter_map(|t| self.detail(t)));
        lines.extend(self.since());
        if self.returned.is_none() {
            lines.push(advice.clone());
        }
        lines.push(format!("Page: {}", self.url));
        Words {
            subject: self.subject(),
            advice,
            text: lines.join("\n"),
        }
    }

    fn subject(&self) -> String {
        let long = self.headline(&self.names());
        let whole = if long.chars().count() <= MOST_SUBJECT {
            long
        } else {
            self.headline(&format!("{} sources", self.troubles.len()))
        };
        whole.chars().take(MOST_SUBJECT).collect()
    }

    fn names(&self) -> String {
        if self.is_whole_bank() {
            return format!("all {} sources", self.of);
        }
        let names: Vec<&str> = self
            .troubles
            .iter()
            .filter_map(|t| t.source.as_deref())
            .collect();
        let listed = &names[..names.len().min(MOST_NAMES)];
        match names.len() - listed.len() {
            0 => listed.join(", "),
            more => format!("{} and {more} more", listed.join(", ")),
        }
    }

    fn headline(&self, names: &str) -> String {
        let bank = &self.bank.name;
        let plural = self.troubles.len() > 1;
        let verb = |one: &'static str, many: &'static str| if plural { many } else { one };
        let back = self.returned.is_some();
        let said = match self.kind {
            Kind::SourceSilent if back => {
                format!("{names} {} again", verb("delivers", "deliver"))
            }
            Kind::SourceSilent => format!("nothing arrives from {names}"),
            Kind::SourceStuck if back => format!("{names} {} again", verb("moves", "move")),
            Kind::SourceStuck => format!("{names} {} one value", verb("repeats", "repeat")),
            Kind::ClockWrong if back => {
                format!("clock of {names} right again")
            }
            Kind::ClockWrong => format!("clock of {names} is wrong"),
            Kind::LevelBelowDeclared if back => "level no longer below declared".to_owned(),
            Kind::LevelBelowDeclared => format!("level is below declared{}", self.by_how_much()),
            _ if back => "measurements arrive and are kept again".to_owned(),
            _ => "measurements do not get in".to_owned(),
        };
        format!("{bank}: {said}")
    }

    fn by_how_much(&self) -> String {
        let c = &self.bank.characteristic;
        match (self.troubles.first().map(|t| &t.detail), c.declared) {
            (Some(Detail::Below { mean, .. }), Some(declared)) => {
                let by = fixed(declared.to_f64() - mean, c.places() + 1);
                format!(" by {by} {}", c.unit)
            }
            _ => String::new(),
        }
    }

    fn detail(&self, trouble: &Trouble) -> Option<String> {
        let who = trouble.source.as_deref().unwrap_or_default();
        let c = &self.bank.characteristic;
        let since = self.clock(trouble.since);
        Some(match &trouble.detail {
            Detail::Silent => format!("{who}: nothing since {since}."),
            Detail::Stuck { value, times } => format!(
                "{who}: {} {} {times} times in a row since {since}; the other sources move.",
                fixed(*value, c.places()),
                c.unit
            ),
            Detail::Ahead { by_us } => format!(
                "{who}: values say they were taken {} s after they arrived.",
                fixed(seconds(*by_us), 0)
            ),
            Detail::Refused { times } => {
                format!("{who}: the last {times} values were refused for the time they carry.")
            }
            Detail::Below { mean, upper } => format!(
                "Mean of all sources {} {} (surely below {}), declared {} {}.",
                c.mean(*mean),
                c.unit,
                c.mean(*upper),
                c.declared.map(|v| v.to_string()).unwrap_or_default(),
                c.unit
            ),
            Detail::Intake(what) => what.clone(),
        })
    }

    fn since(&self) -> Option<String> {
        let first = self.troubles.iter().map(|t| t.since).min()?;
        let until = self.returned.map(|at| format!(" until {}", self.clock(at)));
        Some(format!(
            "Since {}{}.",
            self.clock(first),
            until.unwrap_or_default()
        ))
    }

    /// A time in the plant's zone, with its offset.
    fn clock(&self, at: Time) -> String {
        match at.to_jiff() {
            Some(stamp) => {
                let zoned = stamp.to_zoned_datetime(self.zone.clone());
                zoned.strftime("%Y-%m-%d %H:%M:%S %:z").to_string()
            }
            None => at.to_string(),
        }
    }

    fn advice(&self) -> String {
        let text = match self.kind {
            Kind::SourceSilent if self.is_whole_bank() => {
                "If the line stands, enter a stop; else check the gateway and the line's network."
            }
            Kind::SourceSilent => {
                "Check its sensor, cable and publisher; if it is out of use, say so on the bank's page. Until it delivers, nobody watches it."
            }
            Kind::SourceStuck => {
                "Check that its instrument or signal is alive; do not adjust the source by these values."
            }
            Kind::ClockWrong => {
                "Set the clock of the sender (time service); windows are ordered by the time taken."
            }
            Kind::LevelBelowDeclared => {
                "Raise the level of the whole bank. Information for the packer; the rules are those of your authority, and a qualified person decides."
            }
            _ => {
                "Check the broker and the network to it; while this lasts no bank is watched. What the broker keeps arrives later."
            }
        };
        text.to_owned()
    }
}

#[cfg(test)]
#[path = "condition_words_tests.rs"]
mod tests;
