//! The watch: the sequential examination that decides, cycle by cycle, whether to call somebody.
//!
//! A pure state machine for banks whose sources share cycles. Each closed cycle becomes residuals
//! (clipped about the median, less the mean of those present), which go to five parts:
//!
//! | part | what it sees | file |
//! | --- | --- | --- |
//! | few | one source beyond the margin, since any start back to 10 000 cycles | [`hull`] |
//! | split | two groups beyond the margin, over windows of 5 to 640 cycles | [`contrast`] |
//! | pair | two sources further apart than the margin, over the same windows | [`contrast`] |
//! | erratic, quiet | one source's spread beyond the spread margin, since any start | [`scatter`] |
//!
//! It learns sigma, dependence and the shape of deviations ([`learning`]); until it has, the look
//! decides. Everything is in the unit until it is compared with a threshold, so a new sigma moves no
//! evidence. Must hold: the same cycles give the same calls to the last bit, also when the state was
//! written and read in between; what moves all sources alike changes nothing. Deliberately absent:
//! naming, notices, when to begin afresh; the engine decides these.

mod bars;
mod block;
mod contrast;
mod first;
mod follow;
mod found;
mod hull;
mod learning;
mod learnt;
mod past;
mod residual;
mod rows;
mod scale;
mod scatter;
mod scores;
mod shape;
mod since;
mod step;
mod tell;
pub mod thresholds;

use serde::{Deserialize, Serialize};

use super::track::{Aspect, Moment};
use crate::model::{SourceIx, Time};

use bars::Bars;
use first::First;
use hull::Rise;
use learning::Learner;
pub use learnt::Learnt;
pub use past::{ContrastBlocks, Since, Stretch};
use rows::Rows;
use scale::Scale;
use scatter::Scatter;
use step::Work;
pub use tell::{Figures, Progress, Reading};
pub use thresholds::Part;

impl Part {
    /// Its name in metrics and in the interface.
    pub const fn key(self) -> &'static str {
        match self {
            Self::Few => "few",
            Self::Split => "split",
            Self::Pair => "pair",
            Self::Erratic => "erratic",
            Self::Quiet => "quiet",
        }
    }

    /// What it judges.
    pub const fn aspect(self) -> Aspect {
        match self {
            Self::Few | Self::Split | Self::Pair => Aspect::Level,
            Self::Erratic | Self::Quiet => Aspect::Spread,
        }
    }
}

/// What the watch must know of its bank.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Terms {
    /// The largest difference between two sources that does not matter, in the unit; 0 or more.
    pub margin: f64,
    /// The largest ratio of two sds that does not matter; above 1.
    pub spread_margin: f64,
    /// Mean number of cycles to a false call, all parts together.
    pub cycles_per_false_call: f64,
    /// The step of the instrument, in the unit, where known: rounding alone has an sd of it / sqrt 12, and
    /// sigma is never believed to be smaller.
    pub resolution: Option<f64>,
}

/// One closed cycle.
#[derive(Clone, Copy, Debug)]
pub struct Cycle<'a> {
    /// Its place in the window's order.
    pub place: i64,
    /// When its first value was taken.
    pub taken: Time,
    /// Values by [`SourceIx`] as offsets from the bank's origin; NaN is missing.
    pub values: &'a [f64],
}

/// A part has crossed its threshold.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Crossing {
    /// Which.
    pub part: Part,
    /// In which respect.
    pub aspect: Aspect,
    /// The sources that the evidence points to, the strongest first; naming decides.
    pub leading: Vec<SourceIx>,
    /// Statistic over threshold, on the scale of sds.
    pub ratio: f64,
    /// The most likely start.
    pub start: Moment,
    /// The earliest start that the values allow at 95 %.
    pub earliest: Moment,
    /// The latest.
    pub latest: Moment,
}

/// Whether what was learnt stays as it is, because a notice is open.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub enum Frozen {
    /// The watch goes on learning.
    #[default]
    No,
    /// Sigma, dependence and shape stay.
    Yes,
}

/// What is kept of one source.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Strand {
    compared: bool,
    /// Its own margin after it cleared, in the unit.
    margin: f64,
    level: Level,
    scatter: Scatter,
}

/// Evidence on the mean of one source, both ways.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
struct Level {
    up: Rise,
    down: Rise,
}

impl Strand {
    fn forget(&mut self) {
        (self.level, self.scatter) = (Level::default(), Scatter::default());
    }
}

/// The watch of one bank.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Watch {
    terms: Terms,
    strands: Vec<Strand>,
    /// The compared sources, ascending: a place in this list is a column.
    columns: Vec<u16>,
    frozen: Frozen,
    /// Cycles stepped.
    cycle: u64,
    first: First,
    learner: Learner,
    /// What residuals are made with; none before the first fifty cycles.
    scale: Option<Scale>,
    /// The thresholds; none while learning.
    bars: Option<Bars>,
    rows: Rows,
    past: past::Past,
    #[serde(skip)]
    work: Work,
}

impl Watch {
    /// A watch without sources.
    pub fn new(terms: Terms) -> Self {
        Self {
            terms,
            strands: Vec::new(),
            columns: Vec::new(),
            frozen: Frozen::No,
            cycle: 0,
            first: First::default(),
            learner: Learner::default(),
            scale: None,
            bars: None,
            rows: Rows::new(0),
            past: past::Past::default(),
            work: Work::default(),
        }
    }

    /// Makes room for one more source, with the next [`SourceIx`]; it is not compared yet.
    pub fn add_source(&mut self) {
        self.strands.push(Strand::default());
        self.learner.add_source();
    }

    /// Who takes part, by [`SourceIx`]. One that joins begins now. When somebody leaves, all evidence
    /// begins afresh; what was learnt stays. Does nothing when unchanged.
    pub fn compare(&mut self, who: &[bool]) {
        let wanted = |s: usize| who.get(s).copied().unwrap_or(false);
        let leaves = |(s, strand): (usize, &Strand)| strand.compared && !wanted(s);
        let somebody_leaves = self.strands.iter().enumerate().any(leaves);
        let before = self.columns.len();
        for s in 0..self.strands.len() {
            if wanted(s) && !self.strands[s].compared {
                self.join(s);
            }
        }
        if somebody_leaves {
            for (s, strand) in self.strands.iter_mut().enumerate() {
                strand.compared = wanted(s);
            }
            let compared = |s: &u16| self.strands[usize::from(*s)].compared;
            self.columns = self.columns.iter().copied().filter(compared).collect();
            self.begin_afresh();
        }
        if somebody_leaves || self.columns.len() != before {
            self.learner.drop_block();
            self.first = First::default();
            self.refresh();
        }
    }

    fn join(&mut self, source: usize) {
        let strand = &mut self.strands[source];
        strand.forget();
        strand.compared = true;
        let at = self.columns.partition_point(|c| usize::from(*c) < source);
        self.columns.insert(at, source as u16);
        self.rows.insert_column(at);
        self.past.insert_column(at);
    }

    /// Watches a source with a margin of its own, in the unit, where that is larger than the bank's.
    pub fn set_margin(&mut self, source: SourceIx, margin: f64) {
        if let Some(strand) = self.strands.get_mut(source.index()) {
            strand.margin = margin;
            self.refresh_allowed();
        }
    }

    /// A new budget, rate or margin: thresholds follow, evidence stays. Does nothing when unchanged.
    pub fn tune(&mut self, terms: Terms) {
        if self.terms != terms {
            self.terms = terms;
            self.refresh();
        }
    }

    /// Whether sigma, dependence and shape stay as they are. What had been waiting to be learnt is dropped
    /// when they begin to: the notice says that it is not noise alone.
    pub fn freeze(&mut self, frozen: Frozen) {
        if self.frozen != frozen {
            self.learner.drop_waiting();
            self.frozen = frozen;
        }
    }

    /// Forgets all evidence; what was learnt stays.
    pub fn begin_afresh(&mut self) {
        for strand in &mut self.strands {
            strand.forget();
        }
        self.rows = Rows::new(self.columns.len());
        self.past = past::Past::default();
    }

    /// What was learnt, once learning is over: to be kept per product code. `None` also while something
    /// taken up has not proved itself.
    pub fn learnt(&self) -> Option<Learnt> {
        self.learner.is_done().then(|| self.learner.learnt.clone())
    }

    /// Goes on with what was learnt when this product was last made: decides again after 100 cycles, or,
    /// when their noise differs from it, begins to learn anew.
    pub fn take_up(&mut self, learnt: Learnt) {
        self.learner.take_up(learnt);
        self.first = First::default();
        self.refresh();
    }

    /// Learns anew, and forgets all evidence with it.
    pub fn forget_learnt(&mut self) {
        self.learner.forget();
        self.first = First::default();
        (self.scale, self.bars) = (None, None);
        self.begin_afresh();
    }
}

#[cfg(test)]
mod tests;
