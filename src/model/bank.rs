//! A bank: which sources are compared, for what characteristic, and what matters.

use std::fmt;
use std::str::FromStr;

use serde::{Deserialize, Serialize};

use super::{Calendar, Name, US_PER_DAY, US_PER_S, Value};

/// A bank by its place in the configuration, from 0.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
pub struct BankIx(pub u16);

impl BankIx {
    /// As an index into the list of banks.
    pub const fn index(self) -> usize {
        self.0 as usize
    }
}

/// A source by the order in which its bank first knew it, from 0; it never changes while the bank
/// lives, whatever the order in which pages show the sources.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
pub struct SourceIx(pub u16);

impl SourceIx {
    /// As an index into the bank's sources.
    pub const fn index(self) -> usize {
        self.0 as usize
    }
}

/// What is measured. Lengths, masses and so on are all in `unit`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Characteristic {
    /// What it is called, for people ("net content").
    pub name: Name,
    /// The unit of every value, margin, limit and deviation.
    pub unit: Name,
    /// The step of the instrument; `None` when unknown.
    pub resolution: Option<f64>,
    /// What every source should give.
    pub target: Option<Value>,
    /// The declared (label) quantity.
    pub declared: Option<Value>,
    /// Lower limit of a single value.
    pub lower: Option<f64>,
    /// Upper limit of a single value.
    pub upper: Option<f64>,
}

/// Which sources a bank has. Kept with evidence as names alone: what the values mean then is in the values.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(from = "KeptSources", into = "KeptSources")]
pub enum Sources {
    /// Named in physical order.
    Listed(Vec<Name>),
    /// Learnt from what arrives, at most `most` of them.
    Discover {
        /// The configured `most_sources`.
        most: u16,
    },
    /// The shifts that take turns on one machine. A value is the mean of one shift's production on one
    /// day; what arrives belongs to the shift in which it was taken.
    Shifts(Calendar),
}

/// [`Sources`] as kept: shifts as the names they have.
#[derive(Serialize, Deserialize)]
enum KeptSources {
    Listed(Vec<Name>),
    Discover { most: u16 },
}

impl From<Sources> for KeptSources {
    fn from(sources: Sources) -> Self {
        match sources {
            Sources::Listed(names) => Self::Listed(names),
            Sources::Discover { most } => Self::Discover { most },
            Sources::Shifts(calendar) => Self::Listed(calendar.names().cloned().collect()),
        }
    }
}

impl From<KeptSources> for Sources {
    fn from(kept: KeptSources) -> Self {
        match kept {
            KeptSources::Listed(names) => Self::Listed(names),
            KeptSources::Discover { most } => Self::Discover { most },
        }
    }
}

impl Sources {
    /// The names, where they are known beforehand, in their order.
    pub fn names(&self) -> Option<Vec<Name>> {
        match self {
            Self::Listed(names) => Some(names.clone()),
            Self::Shifts(calendar) => Some(calendar.names().cloned().collect()),
            Self::Discover { .. } => None,
        }
    }
}

/// How values of different sources belong together.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Pairing {
    /// By the cycle number in the payload.
    Cycle,
    /// By time slots of this many microseconds.
    Slot {
        /// Length of a slot.
        length_us: i64,
    },
    /// Not at all.
    None,
    // Kept states name a pairing by its place, so new ones come last.
    /// By production day, where the sources are shifts.
    Day,
}

impl Pairing {
    /// Whether sources share cycles or slots.
    pub fn is_paired(self) -> bool {
        self != Self::None
    }
}

/// How the sources stand in the machine.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Layout {
    /// Side by side.
    Row,
    /// Around a rotary machine.
    Ring,
}

/// Sources that share a part, so that its fault moves them together.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Group {
    /// What they share ("supply a").
    pub name: Name,
    /// The sources, in physical order.
    pub members: Vec<Name>,
}

/// What is known of lasting differences between sources.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub enum Offsets {
    /// Nothing: sources are compared as they are.
    #[default]
    None,
    /// Each source is compared with its own usual place.
    Learn,
    /// These, in the unit, are subtracted; a source that is not listed has none.
    Table(Vec<(Name, f64)>),
}

impl Offsets {
    /// The known offset of a source, in the unit.
    pub fn of(&self, source: &str) -> f64 {
        match self {
            Self::None | Self::Learn => 0.0,
            Self::Table(table) => {
                let known = table.iter().find(|(name, _)| **name == *source);
                known.map_or(0.0, |(_, offset)| *offset)
            }
        }
    }
}

/// How many false calls per time a bank may cause.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Budget {
    calls: f64,
    days: f64,
}

/// Why a text is no call budget.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("a call budget reads like \"1 per 90 days\": a number of calls above 0, then days above 0")]
pub struct BudgetError;

impl Budget {
    /// `calls` false calls per `days` days.
    ///
    /// # Errors
    /// When either is not a finite number above zero.
    pub fn new(calls: f64, days: f64) -> Result<Self, BudgetError> {
        let good = |x: f64| x.is_finite() && x > 0.0;
        if good(calls) && good(days) {
            Ok(Self { calls, days })
        } else {
            Err(BudgetError)
        }
    }

    /// False calls allowed in [`Budget::days`].
    pub fn calls(self) -> f64 {
        self.calls
    }

    /// The days that the allowance is for.
    pub fn days(self) -> f64 {
        self.days
    }

    /// False calls allowed per microsecond of calendar time.
    pub fn per_us(self) -> f64 {
        self.calls / (self.days * US_PER_DAY as f64)
    }
}

impl FromStr for Budget {
    type Err = BudgetError;

    fn from_str(text: &str) -> Result<Self, BudgetError> {
        let words: Vec<&str> = text.split_whitespace().collect();
        let number = |word: &str| word.parse::<f64>().map_err(|_| BudgetError);
        match words.as_slice() {
            [calls, "per", days, "day" | "days"] => Self::new(number(calls)?, number(days)?),
            [calls, "per", "day"] => Self::new(number(calls)?, 1.0),
            _ => Err(BudgetError),
        }
    }
}

impl fmt::Display for Budget {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let days = if self.days == 1.0 { "day" } else { "days" };
        write!(f, "{} per {} {days}", self.calls, self.days)
    }
}

/// A bank as the engine uses it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Bank {
    /// Its name, unique in the plant.
    pub name: Name,
    /// The machine it belongs to.
    pub equipment: Option<Name>,
    /// What is measured.
    pub characteristic: Characteristic,
    /// Who is compared.
    pub sources: Sources,
    /// How their values belong together.
    pub pairing: Pairing,
    /// Lengths of the looks' windows in values per source, ascending, each at least 2.
    pub spans: Vec<usize>,
    /// Time between looks.
    pub look_every_us: i64,
    /// Largest difference between any two sources that does not matter, in the unit; 0 or more.
    pub margin: f64,
    /// Largest ratio of two standard deviations that does not matter; above 1.
    pub spread_margin: f64,
    /// False calls allowed.
    pub budget: Budget,
    /// A cycle closes when a source has delivered this many newer ones.
    pub wait_cycles: u32,
    /// A source is silent after this long without anything received; `None` means twenty of its
    /// usual intervals, at least two minutes.
    pub silent_after_us: Option<i64>,
    /// A value taken longer ago than this is refused.
    pub oldest_us: i64,
    /// How the sources stand in the machine: where patterns are looked for, and how pages draw them.
    pub layout: Layout,
    /// Sources that share a part.
    pub groups: Vec<Group>,
    /// What one unit given away costs; the currency is the plant's own.
    pub cost_per_unit: Option<f64>,
    /// The source that all others are compared with.
    pub reference: Option<Name>,
    /// What is known of lasting differences.
    pub offsets: Offsets,
}

impl Bank {
    /// The longest span: how many values a source's window holds.
    pub fn window_length(&self) -> usize {
        self.spans.iter().copied().max().unwrap_or(2)
    }

    /// Whether the watch decides when to call. It needs cycles that sources share, and places that are
    /// known: learnt ones come with chance of their own, which only the look pays for. With one value a
    /// day it would learn for years, so banks of shifts are left to the look with the whole budget.
    pub fn is_watched(&self) -> bool {
        let shares_cycles = matches!(self.pairing, Pairing::Cycle | Pairing::Slot { .. });
        shares_cycles && self.offsets != Offsets::Learn
    }

    /// Looks per second, as the budget counts them.
    pub fn looks_per_s(&self) -> f64 {
        US_PER_S as f64 / self.look_every_us as f64
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn budgets_read_and_write_the_same_words() {
        for text in ["1 per 90 days", "2 per 1 day", "0.5 per 30 days"] {
            assert_eq!(text.parse::<Budget>().expect(text).to_string(), text);
        }
        assert_eq!(
            "3 per day".parse::<Budget>().unwrap().to_string(),
            "3 per 1 day"
        );
        for text in [
            "",
            "1",
            "0 per 90 days",
            "-1 per 90 days",
            "1 per 0 days",
            "one per 90 days",
            "1 per 90 weeks",
            "inf per 1 day",
        ] {
            assert_eq!(text.parse::<Budget>(), Err(BudgetError), "{text:?}");
        }
    }
}
