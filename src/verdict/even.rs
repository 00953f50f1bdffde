//! The even set: the largest set of sources that are alike; whoever is outside is named.
//!
//! Sources are sorted by their means; a run of neighbours is alike when no pair in it differs by more
//! than its margin beyond what chance allows at the naming's family-wise error rate. When all sources
//! lie within the margin, the whole bank is such a run with that probability, whatever their true
//! places, so a wrong name has at most that probability.

use crate::stats::dist::studentized_range;

/// Family-wise error rate of the names at a call.
pub const NAMING_ALPHA: f64 = 0.01;

/// Means of the sources and the errors of their differences.
pub struct Means<'a> {
    /// The means, in the unit.
    pub means: &'a [f64],
    /// Standard error and degrees of freedom of a difference.
    pub error: &'a dyn Fn(usize, usize) -> (f64, f64),
    /// Largest difference of a pair that does not matter.
    pub margin: &'a dyn Fn(usize, usize) -> f64,
}

impl Means<'_> {
    /// P(some pair of alike sources at least this far beyond its margin), by the studentized range;
    /// 1 within the margin. Tukey for a common error, Games–Howell for errors of the pair's own.
    pub fn p_beyond_margin(&self, i: usize, j: usize) -> f64 {
        let (std_error, df) = (self.error)(i, j);
        let beyond = (self.means[i] - self.means[j]).abs() - (self.margin)(i, j);
        if beyond <= 0.0 || std_error.is_nan() || std_error <= 0.0 {
            return 1.0;
        }
        let q = std::f64::consts::SQRT_2 * beyond / std_error;
        studentized_range::sf(q, self.means.len(), df.max(1.0)).unwrap_or(1.0)
    }

    /// The smallest such probability over all pairs.
    pub fn smallest_p(&self) -> f64 {
        let k = self.means.len();
        let pairs = (0..k).flat_map(|i| (i + 1..k).map(move |j| (i, j)));
        // Only pairs beyond the margin can matter, and most are not.
        pairs
            .map(|(i, j)| self.p_beyond_margin(i, j))
            .fold(1.0, f64::min)
    }

    /// Which sources belong to the even set (`true`), at a family-wise error rate `alpha`.
    pub fn even_set(&self, alpha: f64) -> Vec<bool> {
        let k = self.means.len();
        let mut order: Vec<usize> = (0..k).collect();
        order.sort_by(|&a, &b| self.means[a].total_cmp(&self.means[b]));
        let range = |from: usize, to: usize| self.means[order[to]] - self.means[order[from]];
        let mut best = (0, 0);
        let mut from = 0;
        for to in 0..k {
            while (from..to).any(|f| self.p_beyond_margin(order[f], order[to]) < alpha) {
                from += 1;
            }
            let longer = to - from > best.1 - best.0;
            let tighter = to - from == best.1 - best.0 && range(from, to) < range(best.0, best.1);
            if longer || tighter {
                best = (from, to);
            }
        }
        let mut even = vec![false; k];
        for &i in order.iter().take(best.1 + 1).skip(best.0) {
            even[i] = true;
        }
        even
    }
}
