//! Trials of the watch itself: it learns on even cycles, then a fault begins, and the cycles to its call
//! are counted.
//!
//! One watch learns and goes on for a while; the trials begin from its states along the way, so that
//! each has a past of its own and all the evidence that even cycles leave behind.

use crate::engine::watch_terms;
use crate::model::{Bank, Time};
use crate::verdict::watch::{Cycle, Progress, Watch};

use super::assumed::Assumed;
use super::noise::Noise;
use super::outcome::Outcome;
use super::scene::{Fault, Scene};

/// Trials of each fault at most: the standard error of a share is at most 0.035 ...
const MOST_TRIALS: usize = 200;
/// ... and at least, for banks of many sources, whose cycles take longer to work out: 0.07.
const FEWEST_TRIALS: usize = 50;
/// Sources times trials, so that a bank of any size takes about as long.
const WORK: usize = 2_400;
/// Trials that begin from the same state.
const SHARING: usize = 4;
/// Cycles between two of them: the longest window of the watch, and a little so that windows that are
/// due every so many cycles are met at every phase.
const BETWEEN: usize = 653;
/// Even cycles with a seed of its own before a trial's fault.
const LEAD: usize = 10;
/// From here on sigma counts as known.
const KNOWN_DF: f64 = 30_000.0;
/// A watch that has not learnt by then never will.
const MOST_LEARNING: usize = 100_000;
/// No trial is longer, whatever a shift holds.
const MOST_CYCLES: usize = 20_000;
/// Every trial is at least as long: slow lines need more than a shift for small drifts.
const FEWEST_CYCLES: usize = 2_000;

/// A watch with its line.
#[derive(Clone)]
struct Line {
    watch: Watch,
    noise: Noise,
    cycle: i64,
    interval_us: i64,
    values: Vec<f64>,
}

impl Line {
    fn new(assumed: &Assumed, bank: &Bank, seed: u64) -> Self {
        let mut watch = Watch::new(watch_terms(bank, Some(assumed.interval_us)));
        (0..assumed.sources).for_each(|_| watch.add_source());
        watch.compare(&vec![true; assumed.sources]);
        Self {
            watch,
            noise: Noise::new(assumed, bank.characteristic.resolution, seed),
            cycle: 0,
            interval_us: assumed.interval_us,
            values: Vec::new(),
        }
    }

    /// One cycle; whether the watch calls.
    fn step(&mut self, fault: &Fault) -> bool {
        self.noise.next(fault, &mut self.values);
        self.cycle += 1;
        let cycle = Cycle {
            place: self.cycle,
            taken: Time::from_us(self.cycle.saturating_mul(self.interval_us)),
            values: &self.values,
        };
        self.watch.step(&cycle).is_some()
    }

    /// Even cycles; what a false call leaves behind is forgotten, as the engine does.
    fn run_even(&mut self, cycles: usize) {
        let even = Fault::default();
        for _ in 0..cycles {
            if self.step(&even) {
                self.watch.begin_afresh();
            }
        }
    }

    /// Until sigma counts as known; `false` when it never does.
    fn learn(&mut self) -> bool {
        const AT_ONCE: usize = 500;
        for _ in 0..MOST_LEARNING / AT_ONCE {
            self.run_even(AT_ONCE);
            if self.watch.progress() == Progress::Watching && self.watch.figures().df >= KNOWN_DF {
                return true;
            }
        }
        self.watch.progress() == Progress::Watching
    }
}

/// The watch of a bank under one setting, ready for trials.
pub struct Trials {
    starts: Vec<Line>,
    sources: usize,
    interval_us: i64,
    longest: usize,
    trials: usize,
    /// Mean number of cycles to a false call that the budget allows.
    pub cycles_per_false_call: f64,
}

impl Trials {
    /// Lets a watch learn. `None` when it cannot: then the look decides for good.
    pub fn new(assumed: &Assumed, bank: &Bank, seed: u64) -> Option<Self> {
        let mut line = Line::new(assumed, bank, seed);
        if !line.learn() {
            return None;
        }
        let trials = (WORK / assumed.sources.max(1)).clamp(FEWEST_TRIALS, MOST_TRIALS);
        let starts = (0..trials.div_ceil(SHARING)).map(|_| {
            line.run_even(BETWEEN);
            line.clone()
        });
        Some(Self {
            starts: starts.collect(),
            sources: assumed.sources,
            interval_us: assumed.interval_us,
            longest: longest(assumed),
            trials,
            cycles_per_false_call: watch_terms(bank, Some(assumed.interval_us))
                .cycles_per_false_call,
        })
    }

    /// Tries one fault.
    pub fn of(&self, scene: &Scene, seed: u64) -> Outcome {
        let fault = scene.fault(self.sources);
        let calls: Vec<Option<u32>> = (0..self.trials)
            .map(|trial| self.one(&fault, trial, seed))
            .collect();
        Outcome::of_calls(&calls, self.interval_us)
    }

    fn one(&self, fault: &Fault, trial: usize, seed: u64) -> Option<u32> {
        let mut line = self.starts[trial % self.starts.len()].clone();
        line.noise.reseed(seed.wrapping_add(trial as u64));
        line.run_even(LEAD);
        let cycle = (1..=self.longest).find(|_| line.step(fault))?;
        u32::try_from(cycle).ok()
    }
}

/// Cycles after which a trial ends.
fn longest(assumed: &Assumed) -> usize {
    let shift = assumed.values_in(super::outcome::WITHIN_US[2]);
    shift.clamp(FEWEST_CYCLES, MOST_CYCLES)
}
