//! What an explanation must be worth: one cause for all is said only when it explains the sources with
//! less than naming them one by one would take.

use crate::stats;

use super::level::Level;

/// What a free parameter must explain to be worth its place, in squared standard errors. A choice among
/// c candidates costs 2 ln c on top.
pub const PER_PARAMETER: f64 = 1.0;

/// By so much more, in squared standard errors, a common cause must explain than naming does: whoever
/// is named goes on being watched, whoever is explained away is not.
pub const DECISIVELY: f64 = 2.0;

/// What remains without the cause counts as even above this probability. Smaller than the customary
/// 0.05, because that alone would leave one true cause in twenty unsaid.
pub const EVEN_ABOVE: f64 = 0.01;

/// What a choice among so many candidates costs.
pub fn choice(candidates: usize) -> f64 {
    2.0 * (candidates.max(1) as f64).ln()
}

/// Sum of squares.
pub fn squares(values: &[f64]) -> f64 {
    values.iter().map(|v| v * v).sum()
}

/// Variance of a source's mean about the others that is nobody's fault: chance, and lasting offsets
/// within the margin, taken as spread evenly over it.
pub fn nobodys_variance(level: &Level, margin: f64) -> f64 {
    level.errors.mean_variance() + margin * margin / 12.0
}

/// The best that naming sources one by one can do: what is left when `s` of them are set free and the
/// others share one level, and what those `s` cost; the smallest over `s`.
pub fn one_by_one(means: &[f64], variance: f64) -> f64 {
    let mut means = means.to_vec();
    means.sort_by(f64::total_cmp);
    let k = means.len();
    let each = PER_PARAMETER + choice(k);
    let kept =
        |from: usize, length: usize| stats::summarize(&means[from..from + length]).ss / variance;
    // Whoever is kept is a run of neighbours: that leaves the least.
    let freed = |s: usize| {
        let runs = (0..=s).map(|from| kept(from, k - s));
        runs.fold(f64::INFINITY, f64::min) + each * s as f64
    };
    (0..=k / 2).map(freed).fold(f64::INFINITY, f64::min)
}
