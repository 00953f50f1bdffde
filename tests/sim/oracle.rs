//! What a delay is measured against: the CUSUM that knows who moves, by how much and in which
//! direction (Page 1954, optimal by Lorden 1971 and Moustakides 1986), and the generalised likelihood
//! ratio over sources, directions and starts. Their values come from the same feed as the engine's.

use evenrow::stats::dist::normal;

use super::rig::Stepper;

/// States of the chain that stands for a CUSUM's values.
const STATES: usize = 120;

/// What the oracle's scalar does at one value of level and spread: the null or the alternative.
#[derive(Clone, Copy, Debug)]
pub struct Law {
    pub mean: f64,
    pub sd: f64,
}

/// A one-sided CUSUM on the log likelihood ratio of a contrast of the sources.
#[derive(Clone, Debug)]
pub struct Cusum {
    /// Weights of the sources; they sum to zero, and the contrast has variance 1 when nothing moved.
    weights: Vec<f64>,
    null: Law,
    alternative: Law,
    threshold: f64,
    value: f64,
}

impl Cusum {
    /// The CUSUM between two laws of a contrast whose mean time to a false call at the null is `arl0`.
    pub fn with_arl0(weights: Vec<f64>, null: Law, alternative: Law, arl0: f64) -> Self {
        let mut cusum = Self {
            weights,
            null,
            alternative,
            threshold: 0.0,
            value: 0.0,
        };
        let (mut low, mut high) = (0.0, 2.0 + arl0.ln());
        for _ in 0..30 {
            cusum.threshold = f64::midpoint(low, high);
            if cusum.arl(null) < arl0 {
                low = cusum.threshold;
            } else {
                high = cusum.threshold;
            }
        }
        cusum
    }

    /// The log likelihood ratio of a value: `linear * y + square * y² + constant`.
    fn terms(&self) -> (f64, f64, f64) {
        let (a, b) = (self.null, self.alternative);
        let (va, vb) = (a.sd * a.sd, b.sd * b.sd);
        let constant =
            (a.sd / b.sd).ln() + a.mean * a.mean / (2.0 * va) - b.mean * b.mean / (2.0 * vb);
        (b.mean / vb - a.mean / va, 0.5 / va - 0.5 / vb, constant)
    }

    /// P(log likelihood ratio at most `x`) under a law; one of level and spread differs, not both.
    fn cdf(&self, x: f64, law: Law) -> f64 {
        let (linear, square, constant) = self.terms();
        if square == 0.0 {
            let y = (x - constant) / linear;
            return normal::cdf((y - law.mean) / law.sd * linear.signum());
        }
        // A larger spread: the ratio rises with y², and both means are zero.
        let y_square = (x - constant) / square;
        if y_square <= 0.0 {
            0.0
        } else {
            1.0 - 2.0 * normal::sf(y_square.sqrt() / law.sd)
        }
    }

    /// Mean run length from zero under a law, by a Markov chain (Brook and Evans 1972).
    pub fn arl(&self, law: Law) -> f64 {
        let n = STATES;
        let width = 2.0 * self.threshold / (2.0 * n as f64 - 1.0);
        let mut rows = vec![vec![0.0; n + 1]; n];
        for (i, row) in rows.iter_mut().enumerate() {
            let mut below = 0.0;
            for (j, entry) in row.iter_mut().take(n).enumerate() {
                let edge = (j as f64 - i as f64 + 0.5) * width;
                let up_to = self.cdf(edge, law);
                *entry = f64::from(u8::from(i == j)) - (up_to - below);
                below = up_to;
            }
            row[n] = 1.0;
        }
        solve(rows)
    }

    /// Sums the log likelihood ratio up.
    fn add(&mut self, y: f64) -> bool {
        let (linear, square, constant) = self.terms();
        self.value = (self.value + linear * y + square * y * y + constant).max(0.0);
        self.value >= self.threshold
    }
}

impl Stepper for Cusum {
    fn step(&mut self, values: &[f64]) -> bool {
        let y = values.iter().zip(&self.weights).map(|(v, w)| v * w).sum();
        self.add(y)
    }
}

/// The first unknown of a system of equations, each with its right side at the end (Gauss; the matrix
/// is the identity less a chain that leaks, so no pivots are needed).
fn solve(mut rows: Vec<Vec<f64>>) -> f64 {
    let n = rows.len();
    for p in (1..n).rev() {
        let pivot = rows[p].clone();
        for row in rows.iter_mut().take(p) {
            let factor = row[p] / pivot[p];
            for (x, y) in row.iter_mut().zip(&pivot) {
                *x -= factor * y;
            }
        }
    }
    rows[0][n] / rows[0][0]
}

/// The textbook's two-sided CUSUM of one source: reference value 0.5, decision interval `h`.
pub struct TwoSided {
    up: f64,
    down: f64,
    h: f64,
}

impl TwoSided {
    pub fn new(h: f64) -> Self {
        Self {
            up: 0.0,
            down: 0.0,
            h,
        }
    }
}

impl Stepper for TwoSided {
    fn step(&mut self, values: &[f64]) -> bool {
        let y = values[0];
        self.up = (self.up + y - 0.5).max(0.0);
        self.down = (self.down - y - 0.5).max(0.0);
        // The tables count a value at the limit as a call; with continuous values it is all the same.
        self.up >= self.h || self.down >= self.h
    }
}

/// The largest standardised sum of any source over any start, for noise of sd 1.
pub struct Glr {
    threshold: f64,
    /// Prefix sums of each source's standardised deviation, a cycle after the other.
    sums: Vec<Vec<f64>>,
    lags: Vec<usize>,
}

impl Glr {
    /// `threshold` is that of the standardised sum. Starts lie at every lag up to 60, then 2 % apart up
    /// to 4 000, which a sum that has grown for long does not notice.
    pub fn new(k: usize, threshold: f64) -> Self {
        let mut lags: Vec<usize> = (1..=60).collect();
        while lags.last().is_some_and(|l| *l < 4000) {
            let next = lags[lags.len() - 1] as f64 * 1.02;
            lags.push(next.ceil() as usize);
        }
        Self {
            threshold,
            sums: vec![vec![0.0]; k],
            lags,
        }
    }
}

impl Stepper for Glr {
    fn step(&mut self, values: &[f64]) -> bool {
        let k = values.len() as f64;
        let mean = values.iter().sum::<f64>() / k;
        let scale = (k / (k - 1.0)).sqrt();
        let bound = self.threshold * self.threshold;
        let mut called = false;
        for (v, sums) in values.iter().zip(&mut self.sums) {
            let now = sums[sums.len() - 1] + (v - mean) * scale;
            let held = self.lags.iter().take_while(|l| **l <= sums.len());
            called |= held
                .into_iter()
                .any(|&lag| (now - sums[sums.len() - lag]).powi(2) >= bound * lag as f64);
            sums.push(now);
        }
        called
    }
}
