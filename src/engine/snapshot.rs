//! What pages and metrics see: a picture of the present, one `Arc` per bank, replaced only when that
//! bank changed.

use std::collections::BTreeMap;
use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{Bank, LineEvent, Name, Reason, Refusal, SourceIx, Time, Value};
use crate::notice::{Kind, Manners, Notice, Route};
use crate::verdict::watch::{Figures, Progress, Reading};
use crate::verdict::{BudgetKept, Estimate, Look};

use super::condition::Condition;
use super::papers::Raised;

/// What the engine knows of the plant besides its banks.
#[derive(Clone, Debug)]
pub struct Plant {
    /// Its name.
    pub name: Name,
    /// The zone in which people read times.
    pub zone: jiff::tz::TimeZone,
    /// Where the pages are, without a slash at the end (`http://127.0.0.1:7310`).
    pub pages: String,
    /// Where notices go besides the broker, in the order of the configuration.
    pub routes: Vec<Route>,
    /// Its manners with notices.
    pub manners: Manners,
}

/// The present.
#[derive(Clone, Debug)]
pub struct Snapshot {
    /// Rises with every change.
    pub version: u64,
    /// The plant.
    pub plant: Arc<Plant>,
    /// The broker that measurements come from.
    pub broker: Condition,
    /// The embedded store.
    pub store: Condition,
    /// The banks, in the order of the configuration.
    pub banks: Vec<Arc<BankView>>,
    /// Refusals that belong to no bank.
    pub refusals: Vec<RefusalView>,
    /// The ways out: the broker first, then the outlets in the order of the configuration.
    pub outlets: Vec<OutletView>,
}

/// A way out, now.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct OutletView {
    /// Its name.
    pub name: Name,
    /// Deliveries not yet confirmed.
    pub waiting: usize,
    /// What it last complained of; none when its last delivery was confirmed.
    pub trouble: Option<String>,
    /// Deliveries confirmed since the process started.
    pub delivered: u64,
    /// Failures told since the process started; what failed is kept and sent again.
    pub failed: u64,
}

impl OutletView {
    /// A way out that nothing has been sent on.
    pub fn new(name: Name) -> Self {
        Self {
            name,
            waiting: 0,
            trouble: None,
            delivered: 0,
            failed: 0,
        }
    }
}

/// A bank, now.
#[derive(Clone, Debug)]
pub struct BankView {
    /// Its setup.
    pub bank: Arc<Bank>,
    /// Its sources in display order.
    pub sources: Vec<SourceView>,
    /// The newest look of each span, shortest span first; empty before the first look.
    pub looks: Vec<Arc<Look>>,
    /// The span of the look whose figures stand for now in [`SourceView`]; `None` before a source
    /// could be judged.
    pub shown_span: Option<usize>,
    /// Its open notices, newest first.
    pub open: Vec<Arc<Notice>>,
    /// Notices raised since the process started, by kind.
    pub raised: BTreeMap<Kind, u64>,
    /// Measurements since the process started by outcome: `accepted`, `late`, or a reason's word.
    pub outcomes: BTreeMap<&'static str, u64>,
    /// Refusals, the last of each kind.
    pub refusals: Vec<RefusalView>,
    /// How the cycles (or slots) came in; `None` without pairing.
    pub cycles: Option<Cycles>,
    /// The stop, while the line stands.
    pub stopped: Option<LineEvent>,
    /// What the line makes, since the first changeover.
    pub product: Option<Name>,
    /// The newest line events, oldest first.
    pub line_events: Vec<LineEvent>,
    /// What the watch says of itself; `None` without pairing.
    pub watch: Option<WatchView>,
    /// The usual time between values of a source.
    pub interval_us: Option<i64>,
    /// When the next look is due, if anything new has arrived.
    pub next_look: Option<Time>,
    /// The newest time of a measurement that was taken in.
    pub newest_taken: Option<Time>,
    /// Mean of all sources over [`BankView::shown_span`], in the unit.
    pub mean: Option<f64>,
    /// Whether it kept its call budget; `None` before any time has passed.
    pub kept: Option<BudgetKept>,
    /// The newest notices raised, oldest first.
    pub raised_at: Vec<Raised>,
    /// What gathers of the day; `None` where the sources are no shifts.
    pub shifts: Option<ShiftsView>,
}

/// The shifts of a bank whose sources they are, now.
#[derive(Clone, Debug, PartialEq)]
pub struct ShiftsView {
    /// Those that run; the one that ends first comes first.
    pub running: Vec<RunningShift>,
    /// Shifts of a day that had fewer values than [`ShiftsView::fewest`], and did not enter.
    pub skipped: u64,
    /// Values without which a shift of a day does not enter.
    pub fewest: u64,
}

/// A shift of a day, so far.
#[derive(Clone, Debug, PartialEq)]
pub struct RunningShift {
    /// The shift.
    pub name: Name,
    /// When it is over.
    pub end: Time,
    /// Values so far.
    pub count: u64,
    /// Their mean, in the unit.
    pub mean: f64,
}

/// The watch of a bank, now.
#[derive(Clone, Debug, PartialEq)]
pub struct WatchView {
    /// Whether it decides yet.
    pub progress: Progress,
    /// How far each part is from its threshold; empty while it learns.
    pub readings: Vec<Reading>,
    /// What it learnt, and how the budget became its thresholds.
    pub figures: Figures,
}

/// Counts of cycles or slots since the bank's windows began.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Cycles {
    /// Closed with enough sources.
    pub closed: u64,
    /// Skipped with too few.
    pub skipped: u64,
    /// Open now.
    pub open: u64,
}

/// Whether a source takes part.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum SourceState {
    /// Listed, and nothing has arrived yet.
    Awaited,
    /// Discovered, with fewer than 50 values.
    New,
    /// Delivers.
    Present,
    /// Has delivered nothing for longer than it may.
    Silent,
    /// Taken out of use by a person.
    OutOfUse,
}

impl SourceState {
    /// The word in interfaces and for people.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Awaited => "awaited",
            Self::New => "new",
            Self::Present => "present",
            Self::Silent => "silent",
            Self::OutOfUse => "out_of_use",
        }
    }
}

/// A source, now. Figures come from the newest look over [`BankView::shown_span`]; those of a source
/// that an open notice names rest on the values since it left.
#[derive(Clone, Debug)]
pub struct SourceView {
    /// Which.
    pub source: SourceIx,
    /// Its name.
    pub name: Name,
    /// Whether it takes part.
    pub state: SourceState,
    /// Values in its window.
    pub values: usize,
    /// The newest value.
    pub last_value: Option<f64>,
    /// When that was taken.
    pub last_taken: Option<Time>,
    /// When anything last arrived.
    pub last_received: Option<Time>,
    /// Deviation from the even set without it, in the unit, with the simultaneous 95 % interval.
    pub deviation: Option<Estimate>,
    /// The same in standard deviations within sources.
    pub deviation_sigmas: Option<f64>,
    /// Ratio of its sd to the others'.
    pub sd_ratio: Option<Estimate>,
    /// The kinds of open notices that name it.
    pub named: Vec<Kind>,
    /// Received minus taken, the median of the newest values, in microseconds; negative where its clock
    /// is ahead.
    pub lag_us: Option<i64>,
}

/// The last refusal of one kind, and how many there were.
#[derive(Clone, Debug, PartialEq)]
pub struct RefusalView {
    /// Why.
    pub reason: Reason,
    /// How many since the process started.
    pub count: u64,
    /// The last one.
    pub last: Refusal,
    /// When that arrived.
    pub at: Time,
}

/// One value in a window.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct WindowValue {
    /// When it was taken.
    pub taken: Time,
    /// Its cycle or slot, where the bank pairs.
    pub cycle: Option<i64>,
    /// The value less the bank's origin.
    pub offset: f64,
}

/// One source's window.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct WindowView {
    /// The source.
    pub source: Name,
    /// The bank's origin, which is to be added to every offset.
    pub origin: Value,
    /// The values, oldest first.
    pub values: Vec<WindowValue>,
}
