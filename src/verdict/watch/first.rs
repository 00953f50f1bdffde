//! The first fifty cycles, before anything is known: kept as they came, for a first idea of sigma.

use serde::{Deserialize, Serialize};

use crate::verdict::track::Moment;

use super::residual::median;

/// Cycles that the first idea rests on.
pub const CYCLES: usize = 50;

/// Makes the median absolute deviation of normal values their sd.
const NORMAL: f64 = 1.4826;

/// The cycles so far, with their values by column.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct First {
    /// When, and the values; NaN is missing.
    pub cycles: Vec<(Moment, Vec<f64>)>,
    /// Whether the fifty before them did not scatter at all.
    pub still: bool,
}

impl First {
    /// Begins again after fifty cycles that did not scatter at all.
    pub fn after_still() -> Self {
        Self {
            cycles: Vec::new(),
            still: true,
        }
    }

    /// A first idea of sigma, in the unit: the median over sources of the median absolute deviation of
    /// each source's distances from the cycle's median, about their own median. Neither offsets nor common
    /// movement nor a few wild values enter. 0 when everything stands still.
    pub fn sigma(&self) -> f64 {
        let columns = self.cycles.first().map_or(0, |(_, v)| v.len());
        let distances = self.cycles.iter().filter_map(|(_, values)| {
            let mut present = finite(values.iter());
            let middle = (present.len() > 1).then(|| median(&mut present))?;
            Some(values.iter().map(|v| v - middle).collect::<Vec<f64>>())
        });
        let distances: Vec<Vec<f64>> = distances.collect();
        let series = (0..columns).map(|c| finite(distances.iter().map(|row| &row[c])));
        let series: Vec<Vec<f64>> = series.filter(|s| s.len() > 2).collect();
        let typical = |scale: &dyn Fn(&[f64]) -> f64| {
            let mut scales: Vec<f64> = series.iter().map(|s| scale(s)).collect();
            if scales.is_empty() {
                0.0
            } else {
                median(&mut scales)
            }
        };
        // Coarse rounding can leave more than half of the values equal; then the plain sd must do.
        let robust = typical(&absolute_deviation) * NORMAL;
        if robust > 0.0 { robust } else { typical(&sd) }
    }
}

fn finite<'a>(values: impl Iterator<Item = &'a f64>) -> Vec<f64> {
    values.copied().filter(|v| v.is_finite()).collect()
}

fn absolute_deviation(values: &[f64]) -> f64 {
    let mut sorted = values.to_vec();
    let middle = median(&mut sorted);
    for v in &mut sorted {
        *v = (*v - middle).abs();
    }
    median(&mut sorted)
}

fn sd(values: &[f64]) -> f64 {
    let n = values.len() as f64;
    let mean = values.iter().sum::<f64>() / n;
    (values.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / (n - 1.0)).sqrt()
}
