//! Spread of one source: its deviations from its own last ten values, scored against those of the
//! others.
//!
//! A step of level enters for ten cycles only; on the residual itself a step of 2.5 sd would cross as
//! spread before it crosses as level. Deviations are seen against the present variance of the others,
//! so that a bank whose sources all become noisier is still even.

use serde::{Deserialize, Serialize};

use super::hull::Rise;

/// The values that a new one is compared with.
const BEFORE: usize = 10;

/// Deviations enter the present variance with at most this many sd: a source that turns erratic shall
/// not make the others look quiet.
const LARGEST: f64 = 3.0;

/// Deviations, of all other sources together, that the present variance rests on.
const MEMORY: f64 = 500.0;

/// What is kept of the spread of one source.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Scatter {
    values: [f64; BEFORE],
    next: u8,
    held: u8,
    /// Its present variance, in the bank's.
    pub present: f64,
    /// Scores of deviations over the margin, upward.
    pub up: Rise,
    /// Scores of deviations times the margin, downward.
    pub down: Rise,
}

impl Default for Scatter {
    fn default() -> Self {
        Self {
            values: [0.0; BEFORE],
            next: 0,
            held: 0,
            present: 1.0,
            up: Rise::default(),
            down: Rise::default(),
        }
    }
}

impl Scatter {
    /// The deviation of `z` from the mean of the ten before it, with the sd that `z` has; `None` for the
    /// first ten.
    #[inline]
    pub fn deviation(&mut self, z: f64) -> Option<f64> {
        let full = usize::from(self.held) == BEFORE;
        let n = BEFORE as f64;
        let e = (z - self.values.iter().sum::<f64>() / n) * (n / (n + 1.0)).sqrt();
        self.values[usize::from(self.next)] = z;
        self.next = (self.next + 1) % BEFORE as u8;
        self.held = (self.held + 1).min(BEFORE as u8);
        full.then_some(e)
    }

    /// Lets a deviation enter the present variance, one of `k` sources.
    #[inline]
    pub fn enter(&mut self, e: f64, k: usize) {
        let cycles = (MEMORY / (k - 1) as f64).max(5.0);
        let square = e.clamp(-LARGEST, LARGEST).powi(2);
        self.present += (square - self.present) / cycles;
    }
}

/// What a margin between two sds is between the deviations of residuals, which contain the others'
/// noise: a source whose sd is `ratio` times that of all `k - 1` others has residuals with this many
/// times theirs (from Var r_i = sigma_i^2 (1 - 2/k) + sum of all sigma_j^2 / k^2, Grubbs 1948).
pub fn seen_ratio(ratio: f64, k: usize) -> f64 {
    let k = k as f64;
    let square = ratio * ratio;
    let own = square * (1.0 - 1.0 / k) + 1.0 / k;
    let others = 1.0 + (square - 1.0) / (k * (k - 1.0));
    (own / others).sqrt()
}
