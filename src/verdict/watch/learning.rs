//! What the watch learns of a bank: the sd of the noise, how alike neighbours are, how large deviations
//! are among each other.
//!
//! Must hold: the present is never learnt at once (ten blocks of fifty cycles lie between, so that a
//! drift or a source that turns erratic cannot hide itself), except while learning, when the look
//! decides; nothing is learnt while a notice is open, and what had been waiting is dropped with it.

use std::collections::VecDeque;

use serde::{Deserialize, Serialize};

use super::block::{CYCLES, Share, Tally};
use super::learnt::Learnt;

/// Degrees of freedom at which learning ends: sigma to 1 %. An error of 0.5 % moves the mean number of
/// cycles to a false call by 12 %; the thresholds pay for what is left until [`KNOWN_DF`].
const ENOUGH_DF: f64 = 5_000.0;
/// No bank is watched on fewer cycles than this, however many its sources.
const FEWEST_CYCLES: u32 = 500;
/// From here on the thresholds take sigma as known.
pub const KNOWN_DF: f64 = 30_000.0;
/// Blocks after which what was taken up has proved itself.
const PROVING: u32 = 2;
/// Closed blocks that wait: 500 cycles.
const WAITING: usize = 10;
/// The shape of deviations is learnt until so many were counted, then kept.
const SHAPE_ENOUGH: u32 = 60_000;

/// Gathers what is learnt, block by block.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Learner {
    /// What counts.
    pub learnt: Learnt,
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

    /// Whether learning is over, and what was taken up has proved itself.
    pub fn is_done(&self) -> bool {
        self.done && self.doubt.is_none()
    }

    /// Cycles seen and needed until it is.
    pub fn progress(&self, k: usize) -> (u32, u32) {
        let waiting = self.waiting.len() as u32 * CYCLES + self.in_block;
        if self.doubt.is_some() {
            (waiting, PROVING * CYCLES)
        } else {
            let cycles = self.learnt.cycles() + waiting;
            // Missing values make it take longer.
            (cycles, Self::needed(k).max(cycles + 1))
        }
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
        if self.learnt.shape().total() < SHAPE_ENOUGH {
            self.learnt.count(e);
        }
    }

    /// Whether sizes of deviations are still being counted.
    pub fn counts_sizes(&self) -> bool {
        self.learnt.shape().total() < SHAPE_ENOUGH
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

    /// Goes on with what was learnt earlier, once it has proved itself.
    pub fn take_up(&mut self, learnt: Learnt) {
        self.drop_waiting();
        self.done = true;
        self.learnt = learnt;
        self.doubt = Some((0.0, 0.0));
    }

    /// Begins to learn anew.
    pub fn forget(&mut self) {
        self.drop_waiting();
        (self.learnt, self.done, self.doubt) = (Learnt::default(), false, None);
    }

    /// Ends a cycle; every fiftieth ends a block.
    pub fn end_cycle(&mut self, relative: &dyn Fn(usize) -> f64) -> Ended {
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
        self.learnt.refresh_shape();
        let cycles = self.learnt.cycles();
        self.done |= self.learnt.df() >= ENOUGH_DF && cycles >= FEWEST_CYCLES;
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
        if self.waiting.len() as u32 + 1 < PROVING {
            return;
        }
        let ratio = (*squares / *df) / self.learnt.plain_variance();
        let error = (2.0 / *df + 2.0 / self.learnt.df()).sqrt();
        let apart = ratio.ln().abs();
        self.doubt = None;
        // Not a number when both stand still: then it has not proved itself either.
        if apart.is_nan() || apart > APART * error {
            self.learnt = Learnt::default();
            self.done = false;
        }
    }
}
