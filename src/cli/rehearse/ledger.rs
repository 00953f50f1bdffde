//! What came of a rehearsal: counts, notices, the last looks.
//!
//! Deliberately absent: how it is told.

use std::collections::BTreeMap;
use std::path::PathBuf;
use std::sync::Arc;

use crate::engine::Snapshot;
use crate::intake::recording::Recorded;
use crate::model::{Name, Reason, Refusal, Time};
use crate::notice::Notice;
use crate::verdict::{Finding, Look};

/// Refused rows shown with their line; the counts tell the rest.
pub const MOST_SHOWN: usize = 10;

/// Something the engine said.
#[derive(Clone, Debug)]
pub enum Said {
    /// A look was taken.
    Digest(Name, Finding),
    /// A look worth keeping whole.
    Look(Arc<Look>),
    /// A notice, as it stands now.
    Notice(Arc<Notice>),
}

/// One bank's counts.
#[derive(Clone, Debug, Default)]
pub struct BankTally {
    /// Looks taken while the recording ran, one for each span.
    pub looks: u64,
    /// Measurements by outcome.
    pub outcomes: BTreeMap<&'static str, u64>,
    /// Where the sources are shifts: production days that are over, and those that a look needs.
    pub days: Option<(u64, usize)>,
}

/// A refused row.
#[derive(Clone, Debug)]
pub struct RefusedRow {
    /// Recording and line.
    pub place: Name,
    /// Why.
    pub reason: Reason,
    /// What exactly.
    pub detail: String,
}

/// Everything that is told at the end.
#[derive(Debug)]
pub struct Ledger {
    /// The recordings as given.
    pub recordings: Vec<String>,
    /// Measurements read.
    pub measurements: u64,
    /// Earliest time taken.
    pub from: Option<Time>,
    /// Latest time taken.
    pub to: Option<Time>,
    /// Rows and values that were no measurements, by reason.
    pub refused: BTreeMap<Reason, u64>,
    /// The first of them.
    pub first_refused: Vec<RefusedRow>,
    /// Counts by bank.
    pub banks: BTreeMap<Name, BankTally>,
    /// Every notice as it stood last, by id.
    pub notices: BTreeMap<Name, Arc<Notice>>,
    /// The looks at what is there in the end.
    pub last_looks: Vec<Arc<Look>>,
}

impl Ledger {
    /// An empty one.
    pub fn new(recordings: &[PathBuf]) -> Self {
        Self {
            recordings: super::names(recordings),
            measurements: 0,
            from: None,
            to: None,
            refused: BTreeMap::new(),
            first_refused: Vec::new(),
            banks: BTreeMap::new(),
            notices: BTreeMap::new(),
            last_looks: Vec::new(),
        }
    }

    /// A measurement was read.
    pub fn read(&mut self, recorded: &Recorded) {
        self.measurements += 1;
        if let Some(taken) = recorded.measurement.taken {
            self.from = Some(self.from.map_or(taken, |from| from.min(taken)));
            self.to = self.to.max(Some(taken));
        }
    }

    /// A row or value was none.
    pub fn refused(&mut self, refusal: &Refusal) {
        *self.refused.entry(refusal.reason).or_default() += 1;
        if self.first_refused.len() < MOST_SHOWN {
            self.first_refused.push(RefusedRow {
                place: refusal.topic.clone(),
                reason: refusal.reason,
                detail: refusal.detail.clone(),
            });
        }
    }

    /// The engine said something.
    pub fn said(&mut self, said: &Said) {
        match said {
            Said::Digest(bank, _) => self.banks.entry(bank.clone()).or_default().looks += 1,
            Said::Look(_) => {}
            Said::Notice(notice) => {
                self.notices.insert(notice.id.clone(), Arc::clone(notice));
            }
        }
    }

    /// A look at what is there in the end.
    pub fn last_look(&mut self, look: &Arc<Look>) {
        self.last_looks.push(Arc::clone(look));
    }

    /// How the banks took what they were given.
    pub fn banks(&mut self, snapshot: &Snapshot) {
        for view in &snapshot.banks {
            let tally = self.banks.entry(view.bank.name.clone()).or_default();
            tally.outcomes.clone_from(&view.outcomes);
            let closed = view.cycles.map_or(0, |c| c.closed);
            let shortest = view.bank.spans.first().copied().unwrap_or_default();
            tally.days = view.shifts.as_ref().map(|_| (closed, shortest));
        }
    }

    /// Values read and refused.
    pub fn rows(&self) -> u64 {
        self.measurements + self.refused.values().sum::<u64>()
    }

    /// Notices that were raised.
    pub fn notices_raised(&self) -> usize {
        self.notices.len()
    }
}
