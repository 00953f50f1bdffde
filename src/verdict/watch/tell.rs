//! What the watch says of itself: how far each part is from its threshold, since when, what it learnt.

use serde::{Deserialize, Serialize};

use super::Watch;
use super::found::Found;
use super::past::ContrastBlocks;
use super::thresholds::{Account, Part, account};
use crate::model::SourceIx;

/// Whether the watch decides yet.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub enum Progress {
    /// Fewer than two sources are compared.
    Alone,
    /// No source scatters at all and the resolution is unknown: there is no sigma. The look decides.
    Still,
    /// Not yet; the look decides.
    Learning {
        /// Cycles learnt from.
        cycles: u32,
        /// Cycles that it takes.
        needed: u32,
    },
    /// Yes.
    Watching,
}

/// How far a part is from its threshold.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Reading {
    /// The part.
    pub part: Part,
    /// Its statistic, on the scale of sds (for pair of a studentized range).
    pub statistic: f64,
    /// Its threshold, on the same scale.
    pub threshold: f64,
    /// Statistic over threshold: above 1 it calls.
    pub ratio: f64,
    /// The source that it points to most.
    pub leading: Option<SourceIx>,
}

/// What was learnt, for people.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Figures {
    /// Sd of a single value within its source, in the unit, of clipped values.
    pub sigma: Option<f64>,
    /// Whether sigma is what rounding alone makes of still values.
    pub from_resolution: bool,
    /// The sds of single sources where they differ.
    pub own_sigma: Vec<(SourceIx, f64)>,
    /// Correlation of neighbours.
    pub phi: f64,
    /// What of it is paid for.
    pub phi_paid: f64,
    /// Degrees of freedom of sigma.
    pub df: f64,
    /// How the budget becomes thresholds; none while learning.
    pub account: Option<Account>,
}

impl Watch {
    /// How far it is.
    pub fn progress(&self) -> Progress {
        let (learnt, needed) = self.learner.progress(self.columns.len());
        let cycles = learnt + self.first.cycles.len() as u32;
        if self.columns.len() < 2 {
            Progress::Alone
        } else if self.bars.is_some() {
            Progress::Watching
        } else if self.scale.is_none() && self.first.still {
            Progress::Still
        } else {
            Progress::Learning { cycles, needed }
        }
    }

    /// How far each part is from its threshold; empty while learning.
    pub fn readings(&self) -> Vec<Reading> {
        let reading = |f: Found| Reading {
            part: f.part,
            statistic: f.statistic,
            threshold: f.threshold,
            ratio: f.ratio(),
            leading: f.leading.first().copied(),
        };
        self.found().into_iter().map(reading).collect()
    }

    /// What was learnt.
    pub fn figures(&self) -> Figures {
        let learnt = &self.learner.learnt;
        let own = self.scale.iter().flat_map(|scale| &scale.own);
        let own = self.columns.iter().zip(own);
        Figures {
            sigma: self.scale.as_ref().map(|s| s.sigma),
            from_resolution: self.scale.as_ref().is_some_and(|s| s.floored),
            own_sigma: own
                .map(|(s, o)| (SourceIx(*s), o.variance.sqrt()))
                .collect(),
            phi: learnt.phi(),
            phi_paid: learnt.phi_paid(),
            df: learnt.df(),
            account: self.bars.as_ref().map(|b| account(&b.basis, &b.thresholds)),
        }
    }

    /// Sums and counts of the cycles that the evidence reaches back to.
    pub fn contrast_blocks(&self) -> ContrastBlocks {
        let sources = self.columns.iter().map(|s| SourceIx(*s)).collect();
        self.past.tell(sources, &self.rows, self.cycle)
    }
}
