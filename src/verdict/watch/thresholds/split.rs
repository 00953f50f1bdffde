//! Many sources moved: the quantile of the split contrast at the worst offsets that the margin allows.
//!
//! With a group of g at the margin above the rest, the split of a from the group and c from the rest
//! against all others has its mean m (c/t + (g−a)/(k−t)) short of the margin, t = a + c; the union bound
//! adds all splits. It is compared with the chi-square quantile (the contrast is one of the squares'
//! sum), and the smaller is taken: with few splits near the margin the union bound, else chi-square.

use super::solve::falling_root;
use crate::stats::dist::{chi_square, f, normal, t};

/// Groups tried before the best is refined.
const GROUPS: usize = 14;

/// One bank's split contrast on one window.
pub struct Split {
    /// ln n! for n up to the number of sources.
    ln_factorial: Vec<f64>,
    sources: usize,
}

impl Split {
    /// For this many sources, 3 or more.
    pub fn new(sources: usize) -> Self {
        let mut ln_factorial = vec![0.0; sources + 1];
        for n in 1..=sources {
            ln_factorial[n] = ln_factorial[n - 1] + (n as f64).ln();
        }
        Self {
            ln_factorial,
            sources,
        }
    }

    /// The quantile of the squared contrast at the tail probability `alpha`, `reach` being m √n/sigma of
    /// the window and `df` the degrees of freedom of sigma. At a reach of 0 the statistic is the sum of
    /// squares over the sources and the quantile chi-square's (F's).
    pub fn quantile(&self, alpha: f64, reach: f64, df: f64) -> f64 {
        let squares = self.squares(alpha, df);
        if reach <= 0.0 {
            return squares;
        }
        // The union bound works on a z for known sigma and is carried to t by its tail probability.
        let ceiling = normal_of_t(squares.sqrt(), df);
        match self.union(alpha, reach, ceiling) {
            Some(z) => t_of_normal(z, df).powi(2).min(squares),
            None => squares,
        }
    }

    fn squares(&self, alpha: f64, df: f64) -> f64 {
        let free = (self.sources - 1) as f64;
        let found = if df.is_finite() {
            f::isf(alpha, free, df).map(|q| q * free)
        } else {
            chi_square::isf(alpha, free)
        };
        // Unreachable for alpha in (0, 1/2]; a wide bound on the safe side.
        found.unwrap_or(2.0 * free + 80.0)
    }

    /// The z at which the union bound of the worst group is `alpha`; none when it is above `ceiling`.
    fn union(&self, alpha: f64, reach: f64, ceiling: f64) -> Option<f64> {
        let mut group = self.worst_group(ceiling, reach, alpha);
        if self.bound(ceiling, reach, group, alpha) > alpha {
            return None;
        }
        let floor = normal::isf(alpha).unwrap_or(0.0);
        let mut z = floor;
        for _ in 0..3 {
            z = falling_root(floor, ceiling, |z| {
                (self.bound(z, reach, group, f64::INFINITY) / alpha).ln()
            });
            let worse = self.worst_group(z, reach, f64::INFINITY);
            if worse == group {
                break;
            }
            group = worse;
        }
        Some(z)
    }

    /// The group whose union bound at `z` is largest: groups on a grid, then the neighbourhood of the
    /// best by halving steps. The first group above `enough` will do.
    fn worst_group(&self, z: f64, reach: f64, enough: f64) -> usize {
        let half = self.sources / 2;
        let value = |g: usize| self.bound(z, reach, g, enough);
        let mut step = half.div_ceil(GROUPS).max(1);
        let (mut best, mut most) = (half, value(half));
        let mut g = 1;
        while g < half && most <= enough {
            let v = value(g);
            if v > most {
                (best, most) = (g, v);
            }
            g += step;
        }
        while step > 1 && most <= enough {
            step = step.div_ceil(2);
            for near in [best.saturating_sub(step).max(1), (best + step).min(half)] {
                let v = value(near);
                if v > most {
                    (best, most) = (near, v);
                }
            }
            if step == 2 {
                step = 1;
            }
        }
        best
    }

    /// The union bound at `z` over all splits, with a group of `group` at the margin; stops when it is
    /// above `enough`.
    fn bound(&self, z: f64, reach: f64, group: usize, enough: f64) -> f64 {
        let mut sum = 0.0;
        let mut previous = 0.0;
        for out in 0..=group {
            let row = self.row(z, reach, (group, out), enough - sum);
            sum += row;
            let small = row < 1e-9 * sum && row < previous;
            if sum > enough || small {
                break;
            }
            previous = row;
        }
        sum
    }

    /// The splits that leave `out` of the group of `group` out, over the number taken from the rest.
    fn row(&self, z: f64, reach: f64, (group, out): (usize, usize), enough: f64) -> f64 {
        let k = self.sources;
        let kept = group - out;
        let ln_kept = self.ln_choose(group, kept);
        let (mut sum, mut previous) = (0.0, 0.0);
        for taken in 0..=k - group {
            let t = kept + taken;
            if t == 0 || t == k {
                continue;
            }
            let (t, k) = (t as f64, k as f64);
            let short =
                taken as f64 * ((k - t) / (k * t)).sqrt() + out as f64 * (t / (k * (k - t))).sqrt();
            let tail = normal::sf(z + reach * short);
            let term = (ln_kept + self.ln_choose(self.sources - group, taken) + tail.ln()).exp();
            sum += term;
            let small = term < 1e-9 * sum && term < previous;
            if sum > enough || small {
                break;
            }
            previous = term;
        }
        sum
    }

    fn ln_choose(&self, n: usize, r: usize) -> f64 {
        self.ln_factorial[n] - self.ln_factorial[r] - self.ln_factorial[n - r]
    }
}

/// The t quantile with the tail probability of the normal `z`: sigma is estimated with `df` degrees.
pub fn t_of_normal(z: f64, df: f64) -> f64 {
    if df.is_infinite() {
        return z;
    }
    // A tail that underflows asks for a threshold beyond any in use: z itself is as good.
    t::isf(normal::sf(z), df).unwrap_or(z)
}

/// The inverse of [`t_of_normal`].
fn normal_of_t(value: f64, df: f64) -> f64 {
    if df.is_infinite() {
        return value;
    }
    t::sf(value, df).and_then(normal::isf).unwrap_or(value)
}
