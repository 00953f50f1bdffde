//! Rates of false calls far too rare to be waited for, by importance sampling.
//!
//! Runs are drawn from a mixture Q of plants in which something does happen: from a random start on one
//! source is off by one of several sizes, or the bank comes apart in a random direction, or one source's
//! standard deviation changes. A run that calls at T counts with the inverse of its mixed likelihood
//! ratio up to T, so that the mean over Q is P(call) when nothing happens (the ratio of a stopped run;
//! Siegmund 1985, chapter 2). Sums over starts follow the recursion R = (R + 1) L of Shiryaev and Roberts.

use super::crew::Runs;
use super::feed::{Feed, Setup};
use super::oracle::Glr;
use super::rig::{Start, Stepper};
use super::table::Figure;

/// Cycles of a run; only calls after the first `SETTLE` count, since what began before the run is in
/// no part of the mixture.
const LENGTH: i64 = 1500;
const SETTLE: i64 = 300;

/// Offsets of one source, in standard deviations of its deviation: a crossing of the sum over n cycles
/// at b is likeliest at b/sqrt(n), so these reach from a few cycles to nearly a thousand.
const OFFSETS: [f64; 7] = [0.25, 0.4, 0.63, 1.0, 1.6, 2.5, 4.0];

/// Lengths of the vector of offsets when the bank comes apart in some direction.
const LENGTHS: [f64; 6] = [0.3, 0.5, 0.8, 1.3, 2.0, 3.2];

/// Standard deviations of one source.
const SDS: [f64; 6] = [0.3, 0.5, 0.75, 1.3, 1.7, 2.4];

/// What becomes likely in the mixture, and how much of it.
const WEIGHTS: [f64; 3] = [0.5, 0.2, 0.3];

/// Exponents below this add nothing.
const NOTHING: f64 = -40.0;

/// One way in which Q differs from a plant where nothing happens.
#[derive(Clone, Copy)]
enum Kind {
    Source,
    Direction,
    Spread,
}

/// Realised over nominal mean cycles to a false call.
pub fn rate(setup: &Setup, runs: &Runs) -> Figure {
    let starts = Start::Learnt(8).prepare(setup);
    let weights = runs.each(|run, seed| {
        let (mut rig, mut feed) = starts.begin(run, seed);
        one(&mut rig, &mut feed)
    });
    over_nominal(&weights, setup)
}

/// The same for the plain likelihood ratio over sources, directions and starts: the sampling itself.
pub fn of_glr(setup: &Setup, threshold: f64, runs: &Runs) -> Figure {
    let weights = runs.each(|_, seed| {
        let mut feed = Feed::new(setup, seed);
        one(&mut Glr::new(setup.k, threshold), &mut feed)
    });
    over_nominal(&weights, setup)
}

fn over_nominal(weights: &[f64], setup: &Setup) -> Figure {
    let called = weights.iter().filter(|w| **w > 0.0).count();
    let probability = Figure::mean(weights);
    let value = (LENGTH - SETTLE) as f64 / probability.value / setup.arl0;
    Figure {
        value,
        error: value * probability.error / probability.value,
        count: called,
    }
}

/// The weight of one run; zero where it does not call in time.
fn one(rig: &mut dyn Stepper, feed: &mut Feed) -> f64 {
    let k = feed.offsets.len();
    let kind = match feed.below(10) {
        0..=4 => Kind::Source,
        5..=6 => Kind::Direction,
        _ => Kind::Spread,
    };
    let start = feed.below(LENGTH);
    let mut mixture = Mixture::new(k);
    let mut values = Vec::new();
    for cycle in 0..LENGTH {
        if cycle == start {
            begin(kind, feed);
        }
        feed.cycle(&mut values);
        mixture.add(&values);
        if rig.step(&values) {
            let weight = 1.0 / mixture.ratio();
            // A ratio beyond the range of a double has a weight of nothing.
            let counts = cycle >= SETTLE && weight.is_finite();
            return if counts { weight } else { 0.0 };
        }
    }
    0.0
}

/// Lets it happen.
fn begin(kind: Kind, feed: &mut Feed) {
    let k = feed.offsets.len();
    let mut pick = |n: usize| feed.below(n as i64) as usize;
    match kind {
        Kind::Source => {
            let (source, size) = (pick(k), OFFSETS[pick(OFFSETS.len())]);
            let sign = if pick(2) == 0 { 1.0 } else { -1.0 };
            feed.offsets[source] = sign * size * (k as f64 / (k as f64 - 1.0)).sqrt();
        }
        Kind::Direction => {
            let length = LENGTHS[pick(LENGTHS.len())];
            let direction = feed.direction(k);
            feed.offsets = direction.iter().map(|x| x * length).collect();
        }
        Kind::Spread => {
            let source = pick(k);
            feed.sds[source] = SDS[pick(SDS.len())];
        }
    }
}

/// The likelihood ratio of Q to a plant where nothing happens, cycle by cycle.
struct Mixture {
    /// Sums over starts for one source off, by source, offset, sign.
    sources: Vec<f64>,
    /// The same for one source's spread, by source, standard deviation.
    spreads: Vec<f64>,
    /// Sums of the deviations within the cycle up to each cycle.
    sums: Vec<Vec<f64>>,
}

impl Mixture {
    fn new(k: usize) -> Self {
        Self {
            sources: vec![0.0; k * OFFSETS.len() * 2],
            spreads: vec![0.0; k * SDS.len()],
            sums: vec![vec![0.0; k]],
        }
    }

    fn add(&mut self, values: &[f64]) {
        let k = values.len() as f64;
        let mean = values.iter().sum::<f64>() / k;
        let scale = (k / (k - 1.0)).sqrt();
        let mut next = self.sums[self.sums.len() - 1].clone();
        for (s, value) in values.iter().enumerate() {
            next[s] += value - mean;
            let z = (value - mean) * scale;
            for (o, offset) in OFFSETS.iter().enumerate() {
                for (sign, way) in [1.0, -1.0].into_iter().enumerate() {
                    let ratio = (way * offset * z - offset * offset / 2.0).exp();
                    let sum = &mut self.sources[(s * OFFSETS.len() + o) * 2 + sign];
                    *sum = (*sum + 1.0) * ratio;
                }
            }
            for (i, sd) in SDS.iter().enumerate() {
                let ratio = (value * value * (0.5 - 0.5 / (sd * sd))).exp() / sd;
                let sum = &mut self.spreads[s * SDS.len() + i];
                *sum = (*sum + 1.0) * ratio;
            }
        }
        self.sums.push(next);
    }

    /// The mixed ratio now: parts whose start is still to come are 1.
    fn ratio(&self) -> f64 {
        let now = self.sums.len() as i64 - 1;
        let to_come = (LENGTH - now) as f64;
        let mean = |sums: &[f64]| sums.iter().sum::<f64>() / sums.len() as f64;
        let each = [
            mean(&self.sources) + to_come,
            self.directions() + to_come,
            mean(&self.spreads) + to_come,
        ];
        let parts = each.iter().zip(WEIGHTS).map(|(part, weight)| part * weight);
        parts.sum::<f64>() / LENGTH as f64
    }

    /// Sum over starts, mean over lengths and all directions: with S the sum of the deviations since the
    /// start, n its cycles and d a length, exp(-d² n/2) times 0F1((k-1)/2; d² |S|²/4).
    fn directions(&self) -> f64 {
        let now = &self.sums[self.sums.len() - 1];
        let half_df = (now.len() as f64 - 1.0) / 2.0;
        let since = |(start, sums): (usize, &Vec<f64>)| {
            let n = (self.sums.len() - 1 - start) as f64;
            let square: f64 = now.iter().zip(sums).map(|(a, b)| (a - b).powi(2)).sum();
            // The series stays below exp(2 sqrt x): where even that is nothing, neither factor may
            // leave the range of a double on the way to zero.
            let of_length = |d: &f64| {
                let (fall, x) = (d * d * n / 2.0, d * d * square / 4.0);
                if 2.0 * x.sqrt() - fall < NOTHING {
                    return 0.0;
                }
                (-fall).exp() * confluent(half_df, x)
            };
            LENGTHS.iter().map(of_length).sum::<f64>() / LENGTHS.len() as f64
        };
        let before = &self.sums[..self.sums.len() - 1];
        before.iter().enumerate().map(since).sum()
    }
}

/// 0F1(; a; x) for x of 0 or more by its series, all of whose terms are positive.
fn confluent(a: f64, x: f64) -> f64 {
    let (mut sum, mut term, mut m) = (1.0, 1.0, 0.0);
    while term > 1e-12 * sum {
        term *= x / ((m + 1.0) * (a + m));
        sum += term;
        m += 1.0;
    }
    sum
}
