//! Noise that is not normal: residuals become normal scores against a reference of some hundred cycles.
//!
//! Sums of a few skewed or heavy-tailed values reach a threshold of five sd far too often, clipped or
//! not: with lognormal noise (sd of the logarithm 0.5) clipped at 3 sd a bank calls 3.5 times as often
//! as its budget says (simulated). Scores of equal sources are normal whatever the noise.
//! Must hold: with a margin no score moves further than its residual does, so that two sources within
//! the margin stay within it; how far a source beyond it lies is then seen a little smaller.

use serde::{Deserialize, Serialize};

use super::residual::Residuals;
use super::rows::Rows;
use super::scale::Scale;
use crate::stats::dist::normal;

/// Knots from a score of -3 to 3, this far apart.
const STEP: f64 = 0.25;
const KNOTS: usize = 25;
/// Neighbouring knots over which the steepest rise is taken; single steps are noise.
const OVER: usize = 3;
/// A reference has at least this many values.
const FEWEST: usize = 1_000;
/// Noise is not normal when its skewness or excess kurtosis is at least this large and this many standard
/// errors (sqrt(6/n), sqrt(24/n)) from 0.
const SKEWNESS: f64 = 0.1;
const KURTOSIS: f64 = 0.4;
const ERRORS: f64 = 4.5;

/// The way from residuals to scores.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Scores {
    /// Residuals at the knots, in the unit, rising.
    knots: Vec<f64>,
    /// What a score of 1 is, in the unit.
    pub unit: f64,
    /// Values are clipped this far from the median beyond the margin, in the unit.
    pub limit: f64,
}

impl Scores {
    /// The scores for the noise in `rows`, each source about its own mean; `None` when it is normal enough
    /// or too short.
    pub fn for_noise(rows: &Rows, columns: usize, scale: &Scale, margin: f64) -> Option<Self> {
        let mut noise = reference(rows, columns);
        if noise.len() < FEWEST || is_normal(&noise) {
            return None;
        }
        noise.sort_unstable_by(f64::total_cmp);
        let knots: Vec<f64> = (0..KNOTS).map(|i| knot(&noise, i)).collect();
        // The smallest rise of residuals per score: one unit of score must not be more than that.
        let rises = knots.windows(OVER + 1).map(|w| w[OVER] - w[0]);
        let rise = rises.fold(f64::INFINITY, f64::min) / (OVER as f64 * STEP);
        let spread = scale.sigma * (1.0 - 1.0 / columns as f64).sqrt();
        let unit = if margin > 0.0 {
            rise.min(spread)
        } else {
            spread
        };
        let rising = knots.windows(2).all(|w| w[1] > w[0]);
        (rising && unit > 0.1 * spread).then_some(Self {
            knots,
            unit,
            limit: scale.clip_sd * scale.sigma,
        })
    }

    /// Turns the residuals of a cycle into scores, in the unit, less their mean.
    pub fn apply(&self, residuals: &mut Residuals) {
        let mut mean = 0.0;
        for (v, share) in residuals.values.iter_mut().zip(&residuals.shares) {
            if !v.is_nan() {
                *v = self.score(*v);
                mean += share * *v;
            }
        }
        for v in &mut residuals.values {
            *v -= mean;
        }
    }

    fn score(&self, r: f64) -> f64 {
        let above = self.knots.partition_point(|knot| *knot < r);
        if above == 0 || above == KNOTS {
            let end = if above == 0 { 0.0 } else { (KNOTS - 1) as f64 };
            return self.unit * (end * STEP - FROM);
        }
        let (low, high) = (self.knots[above - 1], self.knots[above]);
        let place = (above - 1) as f64 + (r - low) / (high - low);
        self.unit * (place * STEP - FROM)
    }
}

/// The score of the first knot, negated.
const FROM: f64 = STEP * (KNOTS - 1) as f64 / 2.0;

/// The residuals held, each source about its own mean.
fn reference(rows: &Rows, columns: usize) -> Vec<f64> {
    let mut all = Vec::with_capacity(columns * rows.held());
    for column in 0..columns {
        let residuals = (1..=rows.held()).map(|back| rows.residual(column, back));
        let own: Vec<f64> = residuals.filter(|r| !r.is_nan()).collect();
        let mean = own.iter().sum::<f64>() / own.len().max(1) as f64;
        all.extend(own.iter().map(|r| r - mean));
    }
    all
}

/// The residual whose share of the sorted noise below is that of normal values below the knot's score:
/// the mean of those within half a step of it.
fn knot(noise: &[f64], i: usize) -> f64 {
    let score = i as f64 * STEP - FROM;
    let n = noise.len();
    let place = |score: f64| ((n as f64 * normal::cdf(score)) as usize).min(n - 1);
    let (from, to) = (place(score - STEP / 2.0), place(score + STEP / 2.0));
    let within = &noise[from..=to];
    within.iter().sum::<f64>() / within.len() as f64
}

fn is_normal(noise: &[f64]) -> bool {
    let n = noise.len() as f64;
    let moment = |p: i32| noise.iter().map(|v| v.powi(p)).sum::<f64>() / n;
    let variance = moment(2);
    let skewness = moment(3) / variance.powf(1.5);
    let kurtosis = moment(4) / (variance * variance) - 3.0;
    let far = |x: f64, least: f64, error: f64| x >= least.max(ERRORS * error);
    !far(skewness.abs(), SKEWNESS, (6.0 / n).sqrt()) && !far(kurtosis, KURTOSIS, (24.0 / n).sqrt())
}
