//! How large a deviation is among the deviations of the noise: normal scores of |e| against what was
//! learnt, so that heavy tails, skewness and rounding do not pass for a change of spread.
//!
//! Must hold: the scores of the learnt deviations have mean 0 and variance 1; nothing is scored beyond
//! the cap, so that a few wild values decide nothing.

use serde::{Deserialize, Serialize};

use crate::stats::dist::normal;

/// Deviations are counted in bins this wide, in sd.
const WIDTH: f64 = 1.0 / 32.0;
/// Up to 8 sd; what is larger counts in the last bin.
const BINS: usize = 256;
/// No score is larger: a few wild values do not pass for a change of spread.
const HIGHEST: f64 = 3.5;
/// No score is smaller: then the mean over the first bin is right for normal values (-2.34); at -3.5 even
/// sources are called quiet three times as often as they may (simulated).
const LOWEST: f64 = -2.7;

/// No value is clipped nearer to the median than this, in sd.
const LEAST_CLIP: f64 = 2.5;

/// Sizes of deviations as counted, and their scores.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Shape {
    counts: Vec<u32>,
    total: u32,
    /// The total when the scores were made.
    scored: u32,
    /// Scores at the edges of the bins.
    scores: Vec<f64>,
    /// Where the tails begin to be heavy, in sd; the last edge when they do not.
    heavy_from: f64,
}

impl Default for Shape {
    fn default() -> Self {
        Self {
            counts: vec![0; BINS],
            total: 0,
            scored: 0,
            scores: Vec::new(),
            heavy_from: BINS as f64 * WIDTH,
        }
    }
}

impl Shape {
    /// Counts a deviation, in sd.
    pub fn count(&mut self, e: f64) {
        let bin = (e.abs() / WIDTH) as usize;
        self.counts[bin.min(BINS - 1)] += 1;
        self.total += 1;
    }

    /// Where values are clipped, in sd: where the tails begin to hold clearly more than twice what normal ones
    /// do, within [2.5, `most`]. Below, offsets and steps would be cut as well; above, a few wild values
    /// in a row would pass for a step.
    pub fn clip_sd(&self, most: f64) -> f64 {
        self.heavy_from.min(most).max(LEAST_CLIP)
    }

    /// How many were counted.
    pub fn total(&self) -> u32 {
        self.total
    }

    /// Makes the scores anew when the count has grown by a quarter since.
    pub fn refresh(&mut self) {
        if self.total > self.scored + self.scored / 4 {
            self.scored = self.total;
            self.scores = scores(&self.counts, self.total);
            self.heavy_from = heavy_from(&self.counts, self.total);
        }
    }

    /// The score of a deviation, in sd; 0 before anything was learnt.
    #[inline]
    pub fn score(&self, e: f64) -> f64 {
        if self.scores.is_empty() {
            return 0.0;
        }
        let x = (e.abs() / WIDTH).min(BINS as f64 - 1e-6);
        let bin = x as usize;
        let (low, high) = (self.scores[bin], self.scores[bin + 1]);
        low + (high - low) * (x - bin as f64)
    }
}

/// The first edge beyond which the deviations are surely more than twice as many as normal ones.
fn heavy_from(counts: &[u32], total: u32) -> f64 {
    /// Standard errors, and some single values, above which more is surely more.
    const SURE: f64 = 4.0;
    let n = f64::from(total);
    let mut beyond = n;
    for (bin, count) in counts.iter().enumerate() {
        let edge = bin as f64 * WIDTH;
        // Both tails.
        let twice = 2.0 * n * 2.0 * normal::sf(edge);
        if edge >= LEAST_CLIP && beyond > twice + SURE * twice.sqrt() + SURE {
            return edge;
        }
        beyond -= f64::from(*count);
    }
    BINS as f64 * WIDTH
}

/// Normal scores at the edges, standardised on the counts themselves.
fn scores(counts: &[u32], total: u32) -> Vec<f64> {
    let n = f64::from(total);
    let mut below = 0.0;
    let mut edges = vec![LOWEST];
    for count in counts {
        below += f64::from(*count);
        let p = ((n - below) / n).clamp(0.5 / n, 1.0 - 0.5 / n);
        // p lies strictly between 0 and 1, so there is a quantile.
        let score = normal::isf(p).unwrap_or(0.0);
        edges.push(score.clamp(LOWEST, HIGHEST));
    }
    let middle = |bin: usize| 0.5 * (edges[bin] + edges[bin + 1]);
    let moment = |of: &dyn Fn(f64) -> f64| {
        let sum: f64 = counts
            .iter()
            .enumerate()
            .map(|(bin, c)| f64::from(*c) * of(middle(bin)))
            .sum();
        sum / n
    };
    let mean = moment(&|s| s);
    let sd = moment(&|s| (s - mean).powi(2)).sqrt();
    if sd <= 0.0 {
        return vec![0.0; BINS + 1];
    }
    edges.iter().map(|s| (s - mean) / sd).collect()
}
