//! The notice as data.

use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{Name, Time};
use crate::verdict::{Effect, Estimate, Pattern, Slip};

use super::Handling;

/// What a notice is about.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Kind {
    /// One or more sources left the even set in level.
    LevelApart,
    /// One or more sources left the even set in spread.
    SpreadApart,
    /// Half or more of the sources stand apart from the rest.
    BankSplit,
    /// The bank's mean is surely below the declared quantity.
    LevelBelowDeclared,
    /// A source delivers nothing.
    SourceSilent,
    /// A source repeats one value beyond chance.
    SourceStuck,
    /// A source's clock is wrong.
    ClockWrong,
    /// Measurements cannot be taken in or kept.
    IntakeTrouble,
}

impl Kind {
    /// Every kind.
    pub const ALL: [Self; 8] = [
        Self::LevelApart,
        Self::SpreadApart,
        Self::BankSplit,
        Self::LevelBelowDeclared,
        Self::SourceSilent,
        Self::SourceStuck,
        Self::ClockWrong,
        Self::IntakeTrouble,
    ];

    /// Whether it is called within the call budget, or is a condition outside it.
    pub const fn is_call(self) -> bool {
        matches!(self, Self::LevelApart | Self::SpreadApart | Self::BankSplit)
    }

    /// The word in topics, metrics and interfaces.
    pub const fn word(self) -> &'static str {
        match self {
            Self::LevelApart => "level_apart",
            Self::SpreadApart => "spread_apart",
            Self::BankSplit => "bank_split",
            Self::LevelBelowDeclared => "level_below_declared",
            Self::SourceSilent => "source_silent",
            Self::SourceStuck => "source_stuck",
            Self::ClockWrong => "clock_wrong",
            Self::IntakeTrouble => "intake_trouble",
        }
    }

    /// The words people read.
    pub const fn words(self) -> &'static str {
        match self {
            Self::LevelApart => "level apart",
            Self::SpreadApart => "spread apart",
            Self::BankSplit => "bank split in two",
            Self::LevelBelowDeclared => "level below declared",
            Self::SourceSilent => "source silent",
            Self::SourceStuck => "source stuck",
            Self::ClockWrong => "clock wrong",
            Self::IntakeTrouble => "intake trouble",
        }
    }
}

/// Where a notice stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum State {
    /// Over: the condition is gone and somebody has seen it.
    Normal,
    /// The condition holds and nobody has acknowledged it.
    Unacknowledged,
    /// The condition holds and somebody has acknowledged it.
    Acknowledged,
    /// The condition is gone and nobody has acknowledged it.
    ReturnedUnacknowledged,
    /// Set aside by a person for a time.
    Shelved,
    /// Held back by design while the machine stands or changes over.
    Suppressed,
    /// Taken out of use by a person.
    OutOfService,
}

impl State {
    /// The word in interfaces.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Normal => "normal",
            Self::Unacknowledged => "unacknowledged",
            Self::Acknowledged => "acknowledged",
            Self::ReturnedUnacknowledged => "returned_unacknowledged",
            Self::Shelved => "shelved",
            Self::Suppressed => "suppressed",
            Self::OutOfService => "out_of_service",
        }
    }

    /// The words people read.
    pub const fn words(self) -> &'static str {
        match self {
            Self::Normal => "normal",
            Self::Unacknowledged => "unacknowledged",
            Self::Acknowledged => "acknowledged",
            Self::ReturnedUnacknowledged => "returned, unacknowledged",
            Self::Shelved => "shelved",
            Self::Suppressed => "suppressed",
            Self::OutOfService => "out of service",
        }
    }

    /// Every state.
    pub const ALL: [Self; 7] = [
        Self::Normal,
        Self::Unacknowledged,
        Self::Acknowledged,
        Self::ReturnedUnacknowledged,
        Self::Shelved,
        Self::Suppressed,
        Self::OutOfService,
    ];

    /// Whether the condition holds and nobody has set the notice aside ([`Notice::holds`] asks the
    /// first alone).
    pub const fn is_active(self) -> bool {
        matches!(self, Self::Unacknowledged | Self::Acknowledged)
    }

    /// Whether the notice still asks for anything: not [`State::Normal`].
    pub const fn is_open(self) -> bool {
        !matches!(self, Self::Normal)
    }
}

/// How soon somebody should act.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Priority {
    /// Within the shift.
    Low,
    /// Within the hour.
    Medium,
    /// Now.
    High,
}

impl Priority {
    /// The word in interfaces and for people.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Low => "low",
            Self::Medium => "medium",
            Self::High => "high",
        }
    }
}

/// A source that a notice names.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct NamedSource {
    /// Its name.
    pub source: Name,
    /// Level: deviation from the even set without it. Spread: ratio of its sd to that of the others.
    /// In the notice's `unit`.
    pub deviation: f64,
    /// Lower end of the simultaneous interval.
    pub low: f64,
    /// Upper end.
    pub high: f64,
}

/// Since when.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Since {
    /// The most likely start.
    pub at: Time,
    /// Earliest start that the data allow at 95 %.
    pub earliest: Time,
    /// Latest start that the data allow at 95 %.
    pub latest: Time,
}

/// Who acknowledged, when, and what they said.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Acknowledgement {
    /// The person.
    pub by: Name,
    /// When.
    pub at: Time,
    /// What they wrote; may be empty.
    pub comment: String,
}

/// One incident's notice.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Notice {
    /// Unique in the plant and safe in topics and addresses: bank, year, running number.
    pub id: Name,
    /// The plant.
    pub plant: Name,
    /// The bank.
    pub bank: Name,
    /// What it is about.
    pub kind: Kind,
    /// Where it stands.
    pub state: State,
    /// How soon to act.
    pub priority: Priority,
    /// The sources named, largest deviation first.
    pub sources: Vec<NamedSource>,
    /// The unit of the deviations.
    pub unit: Name,
    /// Since when.
    pub since: Since,
    /// When the call was made.
    pub raised: Time,
    /// When anything in it last changed.
    pub changed: Time,
    /// When the condition was last seen to be gone.
    pub returned: Option<Time>,
    /// Who acknowledged it.
    pub acknowledged: Option<Acknowledgement>,
    /// At most 70 characters, made for a lock screen.
    pub subject: String,
    /// The whole text.
    pub text: String,
    /// What to check or adjust.
    pub advice: String,
    /// The bank's page.
    pub url: String,
    /// The span of the look that called.
    pub span: usize,
    /// What people did with it.
    pub handling: Handling,
    /// The machine's geometry explains it; level only.
    pub pattern: Option<Pattern>,
    /// All sources read as others; level only.
    pub slip: Option<Slip>,
    /// How far the sources that stayed moved together since the start, in the bank's unit. It is no
    /// divergence and never raises a notice.
    pub common_movement: Option<f64>,
    /// Mean of the sources that the named ones are compared with, in the bank's unit.
    pub even_mean: Option<f64>,
    /// What the bank gives away in an hour, where a cost is configured.
    pub cost_per_hour: Option<f64>,
    /// The last adjustment of a named source since it left, and what became of it.
    pub adjustment: Option<Adjustment>,
}

/// A way out of the house.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Way {
    /// The plant's broker.
    Mqtt,
    /// An outlet of this name.
    Outlet(Name),
}

impl Way {
    /// The name in pages, metrics and logs; no outlet may be called as the broker is.
    pub fn name(&self) -> &str {
        match self {
            Self::Mqtt => Self::MQTT,
            Self::Outlet(name) => name,
        }
    }

    /// The name of the way to the plant's broker.
    pub const MQTT: &'static str = "mqtt";
}

/// One notice on its way out: kept in the store until its outlet has confirmed it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Delivery {
    /// Rises with each delivery of the plant; receivers may use it to drop a repeat.
    pub number: u64,
    /// Where to.
    pub way: Way,
    /// When it was decided.
    pub at: Time,
    /// The notice as it stood then.
    pub notice: Arc<Notice>,
}

/// An adjustment of a named source, and what the values since say of it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Adjustment {
    /// The source.
    pub source: Name,
    /// When it was entered.
    pub at: Time,
    /// By how much, in the bank's unit, where that was said.
    pub amount: Option<f64>,
    /// Values of the source since.
    pub values: usize,
    /// Its deviation over those, in the bank's unit; none before there are enough.
    pub deviation: Option<Estimate>,
    /// What became of it.
    pub effect: Effect,
}

impl Adjustment {
    /// Values after which people are told anew: 10, 20 and 40.
    pub fn stage(&self) -> usize {
        match self.values {
            0..10 => 0,
            10..20 => 10,
            20..40 => 20,
            _ => 40,
        }
    }
}
