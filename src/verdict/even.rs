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
    /// A pair's distance beyond its margin on the studentized range's scale, with its degrees of freedom;
    /// 0 within the margin.
    fn beyond_margin(&self, i: usize, j: usize) -> (f64, f64) {
        let (std_error, df) = (self.error)(i, j);
        let beyond = (self.means[i] - self.means[j]).abs() - (self.margin)(i, j);
        if beyond <= 0.0 || std_error.is_nan() || std_error <= 0.0 {
            return (0.0, df.max(1.0));
        }
        (std::f64::consts::SQRT_2 * beyond / std_error, df.max(1.0))
    }

    /// P(some pair of alike sources as far beyond its margin), by the studentized range: Tukey for
    /// a common error, Games–Howell for errors of the pair's own.
    fn p(&self, q: f64, df: f64) -> f64 {
        if q <= 0.0 {
            return 1.0;
        }
        studentized_range::sf(q, self.means.len(), df).unwrap_or(1.0)
    }

    /// The smallest such probability over all pairs.
    pub fn smallest_p(&self) -> f64 {
        let k = self.means.len();
        let pairs = (0..k).flat_map(|i| (i + 1..k).map(move |j| (i, j)));
        let (mut smallest, mut at) = (1.0_f64, (0.0, f64::INFINITY));
        for (i, j) in pairs {
            let (q, df) = self.beyond_margin(i, j);
            // A smaller distance with no more degrees of freedom is no rarer.
            if q > at.0 || (df > at.1 && q > 0.0) {
                let p = self.p(q, df);
                if p < smallest {
                    (smallest, at) = (p, (q, df));
                }
            }
        }
        smallest
    }

    /// Which sources belong to the even set (`true`), at a family-wise error rate `alpha`.
    pub fn even_set(&self, alpha: f64) -> Vec<bool> {
        let k = self.means.len();
        let mut order: Vec<usize> = (0..k).collect();
        order.sort_by(|&a, &b| self.means[a].total_cmp(&self.means[b]));
        let range = |from: usize, to: usize| self.means[order[to]] - self.means[order[from]];
        let mut best = (0, 0);
        let mut from = 0;
        let mut bar = Bar::new(alpha);
        for to in 0..k {
            while (from..to).any(|f| bar.parts(self, order[f], order[to])) {
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

/// Whether pairs are apart at a probability, remembering what is known of distances with the same degrees
/// of freedom: most pairs of a bank have the same.
struct Bar {
    alpha: f64,
    df: f64,
    /// The largest distance known not to part, and the smallest known to.
    alike: f64,
    apart: f64,
}

impl Bar {
    fn new(alpha: f64) -> Self {
        Self {
            alpha,
            df: 0.0,
            alike: 0.0,
            apart: f64::INFINITY,
        }
    }

    fn parts(&mut self, means: &Means, i: usize, j: usize) -> bool {
        let (q, df) = means.beyond_margin(i, j);
        if df != self.df {
            *self = Self {
                df,
                ..Self::new(self.alpha)
            };
        }
        if q <= self.alike {
            return false;
        }
        if q >= self.apart {
            return true;
        }
        let apart = means.p(q, df) < self.alpha;
        if apart {
            self.apart = q;
        } else {
            self.alike = q;
        }
        apart
    }
}
