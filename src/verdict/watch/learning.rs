//! What the watch learns of a bank: the sd of the noise, how alike neighbours are, how large deviations
//! are among each other.
//!
//! Must hold: the present is never learnt at once (ten blocks of fifty cycles lie between, so that a
//! drift or a source that turns erratic cannot hide itself), except while learning, when the look
//! decides; nothing is learnt while a notice is open, and what had been waiting is dropped with it.

use std::collections::VecDeque;

use serde::{Deserialize, Serialize};

use super::block::{self, CYCLES, Share, Tally};
use super::shape::Shape;
use crate::stats::dist::chi_square;

/// Degrees of freedom at which learning ends: sigma to 1 %. An error of 0.5 % moves the mean number of
/// cycles to a false call by 12 %; the thresholds pay for what is left until [`KNOWN_DF`].
const ENOUGH_DF: f64 = 5_000.0;
/// No bank is watched on fewer cycles than this, however many its sources.
const FEWEST_CYCLES: u32 = 500;
/// From here on the thresholds take sigma as known.
pub const KNOWN_DF: f64 = 30_000.0;
/// Older blocks fade so that never more than this counts: sigma to 0.3 %, and wear is followed.
const LONGEST_DF: f64 = 60_000.0;
/// The same for the sd of a single source: to 1 %.
const LONGEST_OWN_DF: f64 = 6_000.0;
/// Closed blocks that wait: 500 cycles.
const WAITING: usize = 10;
/// Until then the upper limit of the correlation is paid.
const SURE_OF_PHI: u32 = 2_000;
/// The upper 80 % limit lies this many standard errors above.
const UPPER_80: f64 = 0.8416;
/// Nothing above is paid for: beyond it there is no information anyway.
const LARGEST_PHI: f64 = 0.98;
/// Cycles after which sources may have sds of their own.
const OWN_AFTER: u32 = 1_000;
/// Degrees of freedom that a source's own sd rests on at least.
const OWN_DF: f64 = 400.0;
/// No source is believed to have a smaller share of the mean variance: it would own the mean.
const SMALLEST_SHARE: f64 = 0.04;
/// Sds differ below this probability of Bartlett's statistic ...
const UNEQUAL_P: f64 = 1e-4;
/// ... which is this much larger for the heaviest tails that clipping leaves (kurtosis up to 5) ...
const NOT_NORMAL: f64 = 2.0;
/// ... and beyond this ratio; below, thresholds hardly feel it.
const UNEQUAL_RATIO: f64 = 1.1;
/// The shape of deviations is learnt until so many were counted, then kept.
const SHAPE_ENOUGH: u32 = 60_000;

/// What was learnt of a bank under one product.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Learnt {
    /// Sum of squares about the block means.
    squares: f64,
    /// What it is expected to be for a variance of 1.
    df: f64,
    products: f64,
    cycles: u32,
    /// Squares and df of each source.
    own: Vec<(f64, f64)>,
    /// Whether sources are seen to differ, and weigh in the mean accordingly.
    weighted: bool,
    shape: Shape,
}

impl Learnt {
    /// Degrees of freedom of the variance.
    pub fn df(&self) -> f64 {
        self.df
    }

    /// Cycles that are contained.
    pub fn cycles(&self) -> u32 {
        self.cycles
    }

    /// Variance of a single value within its source, unit squared; `None` before the first block.
    pub fn variance(&self) -> Option<f64> {
        (self.df > 0.0).then(|| self.squares / self.df / block::squares_kept(self.phi().max(0.0)))
    }

    /// Correlation of neighbours, without bias.
    pub fn phi(&self) -> f64 {
        if self.squares > 0.0 {
            block::correlation(self.products / self.squares)
        } else {
            0.0
        }
    }

    /// The correlation that is paid for: its upper 80 % limit before 2 000 cycles.
    pub fn phi_paid(&self) -> f64 {
        let phi = self.phi();
        let error = ((1.0 - phi * phi).max(0.0) / self.df.max(1.0)).sqrt();
        let more = if self.cycles < SURE_OF_PHI {
            UPPER_80 * error
        } else {
            0.0
        };
        (phi + more).clamp(0.0, LARGEST_PHI)
    }

    /// Variances of the compared sources, in the unit squared, once they are seen to differ; empty before.
    ///
    /// While the mean of a cycle weighs all alike, a residual contains the others' noise, and variances
    /// are recovered as sigma_i^2 = ((k-1) v_i - mean of v)/(k-2), v_i the residual's over (k-1)/k (Grubbs
    /// 1948). From then on the mean is weighted by one over the variances, and squares tell directly.
    pub fn own_variances(&mut self, columns: &[u16]) -> Vec<f64> {
        let k = columns.len() as f64;
        if self.cycles < OWN_AFTER || columns.len() < 3 {
            return Vec::new();
        }
        let pooled = self.squares / self.df;
        let known = |s: &u16| self.own.get(usize::from(*s)).filter(|own| own.1 >= OWN_DF);
        let seen: Vec<f64> = columns
            .iter()
            .map(|s| known(s).map_or(pooled, |(squares, df)| squares / df))
            .collect();
        let kept = block::squares_kept(self.phi().max(0.0));
        if self.weighted {
            let floor = SMALLEST_SHARE * pooled;
            return seen.iter().map(|v| v.max(floor) / kept).collect();
        }
        let mean = seen.iter().sum::<f64>() / k;
        let recovered = |v: &f64| (((k - 1.0) * v - mean) / (k - 2.0)).max(SMALLEST_SHARE * mean);
        let own: Vec<f64> = seen.iter().map(recovered).collect();
        if !differ(&own, 0.98 * f64::from(self.cycles)) {
            return Vec::new();
        }
        self.weighted = true;
        for (source, variance) in columns.iter().zip(&own) {
            if let Some((squares, df)) = self.own.get_mut(usize::from(*source)) {
                *squares = variance * *df;
            }
        }
        own.iter().map(|v| v / kept).collect()
    }

    /// The sizes of deviations.
    pub fn shape(&self) -> &Shape {
        &self.shape
    }

    /// Takes in a closed block; squares of a source count `relative` of what they are in the pool.
    fn take_in(&mut self, block: &[Share], relative: &dyn Fn(usize) -> f64) {
        for share in block {
            let source = usize::from(share.source);
            if self.own.len() <= source {
                self.own.resize(source + 1, (0.0, 0.0));
            }
            let own = &mut self.own[source];
            let (squares, df) = (own.0 + share.squares, own.1 + share.df);
            let kept = (LONGEST_OWN_DF / df).min(1.0);
            *own = (squares * kept, df * kept);
            let scale = relative(source);
            self.squares += share.squares * scale;
            self.products += share.products * scale;
            self.df += share.df;
        }
        self.cycles = self.cycles.saturating_add(CYCLES);
        let kept = (LONGEST_DF / self.df.max(1.0)).min(1.0);
        for sum in [&mut self.squares, &mut self.products, &mut self.df] {
            *sum *= kept;
        }
    }
}

/// Whether variances on `df` degrees each differ more than by chance: Bartlett's statistic (1937).
fn differ(variances: &[f64], df: f64) -> bool {
    let n = variances.len() as f64;
    let mean = variances.iter().sum::<f64>() / n;
    let statistic = df * variances.iter().map(|v| (mean / v).ln()).sum::<f64>();
    let (low, high) = variances.iter().fold((f64::INFINITY, 0.0), |(l, h), v| {
        (f64::min(l, *v), f64::max(h, *v))
    });
    // Without a quantile (no degrees of freedom) nothing differs.
    let bar = chi_square::isf(UNEQUAL_P, n - 1.0).unwrap_or(f64::INFINITY);
    statistic > NOT_NORMAL * bar && high > low * UNEQUAL_RATIO * UNEQUAL_RATIO
}

/// Gathers what is learnt, block by block.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Learner {
    /// What counts.
    pub learnt: Learnt,
    /// Whether learning is over.
    done: bool,
    /// By source.
    tallies: Vec<Tally>,
    in_block: u32,
    waiting: VecDeque<Vec<Share>>,
    /// Squares and df since something learnt earlier was taken up, until it has proved itself.
    doubt: Option<(f64, f64)>,
}

/// What a block's end brought.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ended {
    /// The block goes on.
    Not,
    /// It ended.
    Block,
}

impl Learner {
    /// Makes room for one more source.
    pub fn add_source(&mut self) {
        self.tallies.push(Tally::default());
    }

    /// Whether learning is over.
    pub fn is_done(&self) -> bool {
        self.done
    }

    /// Cycles that learning takes with `k` sources.
    pub fn needed(k: usize) -> u32 {
        let per_block = f64::from(CYCLES - 1) * (k.max(2) - 1) as f64;
        let blocks = (ENOUGH_DF / per_block).ceil() as u32;
        (blocks * CYCLES).max(FEWEST_CYCLES)
    }

    /// Takes in one residual; NaN is missing.
    #[inline]
    pub fn add(&mut self, source: usize, residual: f64, time: f64) {
        self.tallies[source].add(residual, time);
    }

    /// Counts a deviation, in sd, while their sizes are being learnt.
    #[inline]
    pub fn count(&mut self, e: f64) {
        if self.learnt.shape.total() < SHAPE_ENOUGH {
            self.learnt.shape.count(e);
        }
    }

    /// Cycles in the running block.
    pub fn in_block(&self) -> u32 {
        self.in_block
    }

    /// Whether sizes of deviations are still being counted.
    pub fn counts_sizes(&self) -> bool {
        self.learnt.shape.total() < SHAPE_ENOUGH
    }

    /// Drops the running block: who is compared has changed, so its means are of no use.
    pub fn drop_block(&mut self) {
        self.tallies.fill(Tally::default());
        self.in_block = 0;
    }

    /// Drops what has not been learnt yet: a notice says that it is not noise alone.
    pub fn drop_waiting(&mut self) {
        self.drop_block();
        self.waiting.clear();
    }

    /// Goes on with what was learnt earlier; it has two blocks to prove itself.
    pub fn take_up(&mut self, learnt: Learnt) {
        self.drop_waiting();
        self.done = learnt.df >= 0.99 * ENOUGH_DF;
        self.learnt = learnt;
        self.doubt = Some((0.0, 0.0));
    }

    /// Begins to learn anew.
    pub fn forget(&mut self) {
        self.drop_waiting();
        (self.learnt, self.done, self.doubt) = (Learnt::default(), false, None);
    }

    /// Ends a cycle of `k` sources; every fiftieth ends a block.
    pub fn end_cycle(&mut self, k: usize, relative: &dyn Fn(usize) -> f64) -> Ended {
        self.in_block += 1;
        if self.in_block < CYCLES {
            return Ended::Not;
        }
        self.in_block = 0;
        let tallies = self.tallies.iter_mut().enumerate();
        let block: Vec<Share> = tallies.filter_map(|(s, t)| t.close(s)).collect();
        self.prove(&block);
        self.waiting.push_back(block);
        let wait = if self.done { WAITING } else { 0 };
        while self.waiting.len() > wait {
            let Some(oldest) = self.waiting.pop_front() else {
                break;
            };
            self.learnt.take_in(&oldest, relative);
        }
        self.learnt.shape.refresh();
        let enough = self.learnt.df >= ENOUGH_DF.min(0.98 * df_of(Self::needed(k), k));
        self.done |= enough && self.learnt.cycles >= FEWEST_CYCLES;
        Ended::Block
    }

    /// A product that comes back is believed to have the noise it had, unless two blocks say otherwise.
    fn prove(&mut self, block: &[Share]) {
        /// Standard errors of the logarithm of the ratio of variances; the variance of clipped values is
        /// at most half as uncertain again as that of normal ones.
        const APART: f64 = 6.0;
        let Some((squares, df)) = &mut self.doubt else {
            return;
        };
        *squares += block.iter().map(|s| s.squares).sum::<f64>();
        *df += block.iter().map(|s| s.df).sum::<f64>();
        if self.waiting.len() + 1 < 2 {
            return;
        }
        let ratio = (*squares / *df) / (self.learnt.squares / self.learnt.df);
        let error = (2.0 / *df + 2.0 / self.learnt.df).sqrt();
        self.doubt = None;
        // Not a number or infinite when either is still: then it has not proved itself.
        if !(ratio.ln().abs() <= APART * error) {
            self.learnt = Learnt::default();
            self.done = false;
        }
    }
}

fn df_of(cycles: u32, k: usize) -> f64 {
    f64::from(cycles / CYCLES) * f64::from(CYCLES - 1) * (k.max(2) - 1) as f64
}
