//! The handover: what one shift leaves to the next.
//!
//! Owns what a handover says ([`Handover`], also its JSON form), how it is gathered from the settings, the
//! history and (where the daemon runs) the present, and how it looks on paper. What must hold: the page,
//! the interface and the command say the same, since all are made from one [`Handover`]; times are those
//! of the shift by the clock on the wall, so a day has 23 or 25 hours twice a year. Deliberately absent:
//! anything that a person must not act on without asking (figures on net content are information).

mod figures;
mod gather;
mod picture;
pub mod sheet;
mod stretch;

pub use figures::{LevelFigures, Tolerable, tolerable_error};
pub use gather::{Present, gather};
pub use stretch::{Stretch, Wanted, which};

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use crate::model::Time;

/// A shift's handover.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct Handover {
    /// The plant.
    pub plant: String,
    /// The zone of its clocks, by its IANA name.
    pub zone: String,
    /// The shift.
    pub shift: String,
    /// The day on which it began, by the clock on the wall.
    pub date: String,
    /// Its start.
    #[schema(value_type = String, format = DateTime)]
    pub from: Time,
    /// Its end.
    #[schema(value_type = String, format = DateTime)]
    pub to: Time,
    /// When this was made; before `to` the shift still runs.
    #[schema(value_type = String, format = DateTime)]
    pub made: Time,
    /// Every bank.
    pub banks: Vec<BankPart>,
    /// How much people are told now; null where no daemon runs.
    pub load: Option<LoadPart>,
}

/// How much people are told, beside what published guidance holds for the most.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct LoadPart {
    /// Notices raised in the last 24 hours.
    pub last_day: usize,
    /// The most that one person handles in a day (ISA-18.2 and EEMUA 191, from memory).
    pub most_a_day: usize,
    /// Raised in the last ten minutes.
    pub last_ten_minutes: usize,
    /// Kinds of banks that chatter: raised three times within an hour.
    pub chattering: usize,
    /// Conditions that hold.
    pub standing: usize,
    /// Of these, those that hold for more than 24 hours.
    pub stale: usize,
    /// Whether ten or more came within ten minutes.
    pub flood: bool,
}

/// A bank's part.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct BankPart {
    /// The bank.
    pub bank: String,
    /// What is measured.
    pub characteristic: String,
    /// Its unit.
    pub unit: String,
    /// Decimal places of a deviation.
    pub places: usize,
    /// Largest difference between two sources that does not matter.
    pub margin: f64,
    /// Notices raised in the shift, oldest first.
    pub raised: Vec<NoticePart>,
    /// Notices from before that were not over when it began, oldest first.
    pub carried: Vec<NoticePart>,
    /// The median time from a call to its acknowledgement, in seconds.
    pub response_s: Option<f64>,
    /// Line events, oldest first.
    pub events: Vec<EventPart>,
    /// When the figures of the sources were looked at: the last look kept whole before the end.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub looked: Option<Time>,
    /// The sources in physical order.
    pub sources: Vec<SourcePart>,
    /// Level against target and declared quantity.
    pub level: Option<LevelFigures>,
    /// What became of the measurements since the daemon started, by outcome; null where none runs.
    pub measurements: Option<Vec<(String, u64)>>,
    /// Sources that deliver nothing now.
    pub silent: Vec<String>,
    /// Whether the bank keeps its call budget: `kept`, `agrees` or `broken`.
    pub budget: Option<BudgetPart>,
}

/// The call budget.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct BudgetPart {
    /// `kept`, `agrees` or `broken`.
    pub keeping: String,
    /// The same for people.
    pub words: String,
    /// Calls made.
    pub calls: u64,
    /// Calls of which somebody said what came of them.
    pub told: u64,
    /// Calls with nothing found.
    pub nothing_found: u64,
    /// Days watched.
    pub days: f64,
    /// False calls that the budget allows in that time.
    pub allowed: f64,
}

/// A notice.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct NoticePart {
    /// Its id.
    pub id: String,
    /// What it is about.
    pub kind: String,
    /// One line, as it says now.
    pub subject: String,
    /// What it was about, at its worst.
    pub was: String,
    /// Where it stands now, in words.
    pub state: String,
    /// Whether it still asks for something.
    pub open: bool,
    /// When it was raised.
    #[schema(value_type = String, format = DateTime)]
    pub raised: Time,
    /// When the condition was seen to be gone.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub returned: Option<Time>,
    /// Who acknowledged it.
    pub by: Option<String>,
    /// How long that took, in seconds.
    pub response_s: Option<f64>,
    /// Until when it is shelved.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub shelved_until: Option<Time>,
    /// What came of it, in words.
    pub outcome: Option<String>,
    /// What people wrote, oldest first.
    pub comments: Vec<String>,
}

/// A line event.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct EventPart {
    /// When.
    #[schema(value_type = String, format = DateTime)]
    pub at: Time,
    /// What happened.
    pub what: String,
    /// Who entered it.
    pub by: String,
    /// Why.
    pub reason: String,
}

/// A source at the end of the shift.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct SourcePart {
    /// Its name.
    pub source: String,
    /// Deviation from the even set without it, with the ends of its interval, in the unit.
    pub deviation: Option<[f64; 3]>,
    /// Ratio of its standard deviation to the others', with the ends of its interval.
    pub sd_ratio: Option<[f64; 3]>,
    /// Whether that look named it.
    pub named: bool,
}
