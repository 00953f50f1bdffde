//! How a row is measured: rates of false calls, delays against an oracle, and what is asked of notices.

use evenrow::notice::Kind;

use super::crew::{Crew, Runs};
use super::feed::{Feed, Setup};
use super::notices;
use super::oracle::{Cusum, Glr, Law, TwoSided};
use super::rare;
use super::rig::{Rig, Start, Stepper};
use super::table::Figure;
use super::trouble;

/// Oracles are so quick that their part in the error of a quotient can be made small.
const ORACLE_RUNS: usize = 4000;

/// Cycles before a change, at most; it comes at a random one of them.
const QUIET: i64 = 200;

/// Level's share of the budget.
const LEVEL_SHARE: f64 = 0.8;

/// Who is not called within this many cycles counts as called then.
const MOST_DELAY: i64 = 30_000;

/// What becomes of the sources (from 0) at some moment.
#[derive(Clone, Debug, Default)]
pub struct Change {
    /// (source, offset from then on)
    pub levels: Vec<(usize, f64)>,
    /// (source, standard deviation from then on)
    pub sds: Vec<(usize, f64)>,
}

impl Change {
    pub fn levels(levels: impl IntoIterator<Item = (usize, f64)>) -> Self {
        Self {
            levels: levels.into_iter().collect(),
            sds: Vec::new(),
        }
    }

    pub fn sd(source: usize, sd: f64) -> Self {
        Self {
            levels: Vec::new(),
            sds: vec![(source, sd)],
        }
    }

    pub fn apply(&self, feed: &mut Feed) {
        for &(s, offset) in &self.levels {
            feed.offsets[s] = offset;
        }
        for &(s, sd) in &self.sds {
            feed.sds[s] = sd;
        }
    }

    /// The sources it is about, in order.
    pub fn sources(&self) -> Vec<usize> {
        let levels = self.levels.iter().map(|(s, _)| *s);
        let mut all: Vec<usize> = levels.chain(self.sds.iter().map(|(s, _)| *s)).collect();
        all.sort_unstable();
        all
    }
}

/// What a delay is divided by.
#[derive(Clone, Copy, Debug)]
pub enum Against {
    /// The CUSUM that knows that the first `moved` sources go from `null` beyond the rest to
    /// `alternative` beyond the rest.
    Level {
        moved: usize,
        null: f64,
        alternative: f64,
    },
    /// The CUSUM that knows that the first source goes from one standard deviation to another.
    Spread { null: f64, alternative: f64 },
    /// The likelihood ratio over sources, directions and starts with this threshold.
    Glr(f64),
}

impl Against {
    /// The oracle at the bank's own budget.
    fn stepper(self, setup: &Setup) -> Box<dyn Fn() -> Box<dyn Stepper> + Sync> {
        let k = setup.k as f64;
        match self {
            Self::Glr(threshold) => {
                let k = setup.k;
                Box::new(move || Box::new(Glr::new(k, threshold)))
            }
            Self::Level {
                moved,
                null,
                alternative,
            } => {
                let g = moved as f64;
                let sd = (1.0 / g + 1.0 / (k - g)).sqrt();
                let law = |level: f64| Law {
                    mean: level / sd,
                    sd: 1.0,
                };
                let weights = weights(setup.k, moved, sd);
                let cusum = Cusum::with_arl0(weights, law(null), law(alternative), setup.arl0);
                Box::new(move || Box::new(cusum.clone()))
            }
            Self::Spread { null, alternative } => {
                let sd = (1.0 + 1.0 / (k - 1.0)).sqrt();
                let law = |own: f64| Law {
                    mean: 0.0,
                    sd: (own * own + 1.0 / (k - 1.0)).sqrt() / sd,
                };
                let weights = weights(setup.k, 1, sd);
                let cusum = Cusum::with_arl0(weights, law(null), law(alternative), setup.arl0);
                Box::new(move || Box::new(cusum.clone()))
            }
        }
    }
}

/// The mean of the first `moved` sources less that of the rest, in units of `sd`.
fn weights(k: usize, moved: usize, sd: f64) -> Vec<f64> {
    let one = |s: usize| {
        if s < moved {
            1.0 / moved as f64
        } else {
            -1.0 / (k - moved) as f64
        }
    };
    (0..k).map(|s| one(s) / sd).collect()
}

/// How a row is measured.
pub enum Measure {
    /// Mean run length of the two-sided CUSUM over the published one: the harness checks itself.
    Published { h: f64, shift: f64, arl: f64 },
    /// Mean cycles to a false call over what the budget allows: all, level alone, spread alone, each
    /// over its share.
    FalseCalls {
        setup: Setup,
        start: Start,
        /// A run ends after this many cycles.
        most: i64,
    },
    /// The same for budgets far beyond what can be waited for, by importance sampling.
    Rare { setup: Setup },
    /// The same for the plain likelihood ratio with this threshold: the sampling checks itself.
    RareGlr { setup: Setup, threshold: f64 },
    /// Mean cycles from a change to the call over those of each oracle at the same budget.
    Delay {
        setup: Setup,
        change: Change,
        against: Vec<Against>,
    },
    /// A change that is there from the first cycle: cycles to the call, the worst of twenty runs.
    FromTheFirst { setup: Setup, change: Change },
    /// Whose names stand in the notice `after` cycles after the call: exactly right; any wrong one.
    Names {
        setup: Setup,
        change: Change,
        after: i64,
    },
    /// Share of calls that are about spread, and that name exactly the sources that changed.
    Spread { setup: Setup, change: Change },
    /// The set of possible starts at the call: share that holds the true one, mean width in cycles.
    Since { setup: Setup, change: Change },
    /// Cycles from a full return to the end of the notice.
    Clearing { setup: Setup, change: Change },
    /// Share of notices that end within 5 000 cycles although the sources stay at `stay`.
    WrongClearing {
        setup: Setup,
        change: Change,
        stay: Change,
    },
    /// Notices within 20 000 cycles at a constant offset.
    Repeats { setup: Setup, change: Change },
    /// Share of runs in which a condition is borne.
    Trouble(trouble::Story),
}

impl Measure {
    /// The row's figures from `runs` runs.
    pub fn take(&self, runs: &Runs) -> Vec<Figure> {
        match self {
            Self::Published { h, shift, arl } => vec![published(*h, *shift, *arl, runs)],
            Self::FalseCalls { setup, start, most } => false_calls(setup, *start, *most, runs),
            Self::Rare { setup } => vec![rare::rate(setup, runs)],
            Self::RareGlr { setup, threshold } => vec![rare::of_glr(setup, *threshold, runs)],
            Self::Delay {
                setup,
                change,
                against,
            } => quotients(setup, change, against, runs),
            Self::FromTheFirst { setup, change } => {
                vec![from_the_first(setup, change, runs)]
            }
            Self::Names {
                setup,
                change,
                after,
            } => notices::names(setup, change, *after, runs),
            Self::Spread { setup, change } => notices::spread(setup, change, runs),
            Self::Since { setup, change } => notices::since(setup, change, runs),
            Self::Clearing { setup, change } => {
                vec![notices::clearing(setup, change, runs)]
            }
            Self::WrongClearing {
                setup,
                change,
                stay,
            } => vec![notices::wrong_clearing(setup, change, stay, runs)],
            Self::Repeats { setup, change } => {
                vec![notices::repeats(setup, change, runs)]
            }
            Self::Trouble(story) => vec![trouble::share(*story, runs)],
        }
    }
}

/// Steps until a call, at most `most` cycles: how many, and whether it called.
pub fn until_call(stepper: &mut dyn Stepper, feed: &mut Feed, most: i64) -> (i64, bool) {
    let mut values = Vec::new();
    for cycle in 1..=most {
        feed.cycle(&mut values);
        if stepper.step(&values) {
            return (cycle, true);
        }
    }
    (most, false)
}

fn published(h: f64, shift: f64, arl: f64, runs: &Runs) -> Figure {
    let setup = Setup {
        walk: 0.0,
        offsets: vec![shift],
        ..Setup::even(1)
    };
    let lengths = runs.each(|_, seed| {
        let mut feed = Feed::new(&setup, seed);
        until_call(&mut TwoSided::new(h), &mut feed, i64::MAX).0 as f64
    });
    Figure::mean(&lengths).times(1.0 / arl)
}

fn false_calls(setup: &Setup, start: Start, most: i64, runs: &Runs) -> Vec<Figure> {
    let starts = start.prepare(setup);
    let all = runs.each(|run, seed| {
        let (mut rig, mut feed) = starts.begin(run, seed);
        let cycles = until_call(&mut rig, &mut feed, most).0;
        (cycles, rig.notices.first().map(|n| n.kind))
    });
    let cycles: i64 = all.iter().map(|(cycles, _)| cycles).sum();
    let kinds: Vec<Kind> = all.iter().filter_map(|(_, kind)| *kind).collect();
    let spread = kinds.iter().filter(|k| **k == Kind::SpreadApart).count();
    let each = |calls: usize, share: f64| {
        // Without any call the figure is a lower limit, and its error says that nothing is known.
        let counted = calls.max(1) as f64;
        let ratio = cycles as f64 / counted / setup.arl0 * share;
        Figure {
            value: ratio,
            error: ratio / counted.sqrt(),
            count: calls,
        }
    };
    vec![
        each(kinds.len(), 1.0),
        each(kinds.len() - spread, LEVEL_SHARE),
        each(spread, 1.0 - LEVEL_SHARE),
    ]
}

/// Mean cycles from the change to the call; runs that called before it do not count.
fn delay(
    begin: impl Fn(usize, u64) -> (Box<dyn Stepper>, Feed) + Sync,
    change: &Change,
    runs: &Runs,
) -> Figure {
    let delays = runs.each(|run, seed| {
        let (mut stepper, mut feed) = begin(run, seed);
        let quiet = feed.below(QUIET);
        if until_call(&mut *stepper, &mut feed, quiet).1 {
            return None;
        }
        change.apply(&mut feed);
        Some(until_call(&mut *stepper, &mut feed, MOST_DELAY).0 as f64)
    });
    let delays: Vec<f64> = delays.into_iter().flatten().collect();
    Figure::mean(&delays)
}

fn quotients(setup: &Setup, change: &Change, against: &[Against], runs: &Runs) -> Vec<Figure> {
    let starts = Start::Learnt(8).prepare(setup);
    let ours = |run, seed| {
        let (rig, feed) = starts.begin(run, seed);
        (Box::new(rig) as Box<dyn Stepper>, feed)
    };
    let ours = delay(ours, change, runs);
    let over = |oracle: &Against| ours.over(oracle_delay(setup, change, *oracle, runs));
    against.iter().map(over).collect()
}

fn oracle_delay(setup: &Setup, change: &Change, oracle: Against, runs: &Runs) -> Figure {
    let make = oracle.stepper(setup);
    let begin = |_: usize, seed: u64| (make(), Feed::new(setup, !seed));
    let runs = Runs {
        count: match oracle {
            Against::Glr(_) => ORACLE_RUNS / 4,
            Against::Level { .. } | Against::Spread { .. } => ORACLE_RUNS,
        },
        crew: &Crew { tick: &|| () },
        ..*runs
    };
    delay(begin, change, &runs)
}

fn from_the_first(setup: &Setup, change: &Change, runs: &Runs) -> Figure {
    let mut delays = runs.each(|_, seed| {
        let mut feed = Feed::new(setup, seed);
        change.apply(&mut feed);
        until_call(&mut Rig::new(setup), &mut feed, 5000).0
    });
    delays.sort_unstable();
    let at =
        |share: f64| delays[((delays.len() as f64 * share) as usize).min(delays.len() - 1)] as f64;
    Figure {
        value: at(0.95),
        // From the middle to the end of the ordered runs, as a rough measure of how sharp the figure is.
        error: (at(0.99) - at(0.9)) / 2.0,
        count: runs.count,
    }
}
