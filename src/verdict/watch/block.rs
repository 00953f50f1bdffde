//! Fifty cycles of residuals summed up: squares and neighbours' products about each source's own mean,
//! so that a lasting offset passes neither for noise nor for dependence.

use serde::{Deserialize, Serialize};

/// Cycles in a block. Long enough that the mean taken out costs 2 % of the information, short enough
/// that a drift hardly moves within it.
pub const CYCLES: u32 = 50;

/// A source with fewer values in a block than this says nothing in it.
const FEWEST: f64 = 25.0;

/// What one source's values in the running block add up to.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Tally {
    n: f64,
    time: f64,
    sum: f64,
    squares: f64,
    products: f64,
    pairs: f64,
    pair_sum: f64,
    /// The value of the cycle before.
    last: Option<f64>,
}

/// One source's share of a closed block.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Share {
    /// The source, as an index.
    pub source: u16,
    /// Squares about the block's mean.
    pub squares: f64,
    /// What they are expected to be for a variance of 1 of a single value.
    pub df: f64,
    /// Products of neighbours about the block's mean.
    pub products: f64,
}

impl Tally {
    /// Takes in a residual whose variance is `time` times that of a single value; NaN is missing.
    #[inline]
    pub fn add(&mut self, r: f64, time: f64) {
        if r.is_nan() {
            self.last = None;
            return;
        }
        self.n += 1.0;
        self.time += time;
        self.sum += r;
        self.squares += r * r;
        if let Some(last) = self.last {
            self.products += r * last;
            self.pair_sum += r + last;
            self.pairs += 1.0;
        }
        self.last = Some(r);
    }

    /// Ends the block of a source.
    pub fn close(&mut self, source: usize) -> Option<Share> {
        let t = std::mem::take(self);
        if t.n < FEWEST {
            return None;
        }
        let mean = t.sum / t.n;
        Some(Share {
            source: source as u16,
            squares: (t.squares - t.n * mean * mean).max(0.0),
            df: t.time * (t.n - 1.0) / t.n,
            products: t.products - mean * t.pair_sum + t.pairs * mean * mean,
        })
    }
}

/// Expected products of neighbours and squares, both per cycle, about the mean of a block of a
/// first-order autoregression with correlation `rho` and variance 1.
///
/// From Cov(x_s, x_t) = rho^|s-t| alone; at rho = 0 they are -(n-1)/n^2 and (n-1)/n.
fn expected(rho: f64) -> (f64, f64) {
    let n = f64::from(CYCLES);
    // Sums of rho^j and of (n - j) rho^j over j = 0 … n - 1 (twice but for j = 0), as geometric series.
    let with_first = (1.0 - rho.powi(CYCLES as i32)) / (1.0 - rho);
    let with_all = n + 2.0 * rho / (1.0 - rho) * (n - with_first);
    let of_mean = with_all / (n * n);
    let products = (n - 1.0) * rho - (n + 1.0) * of_mean + 2.0 * with_first / n;
    (products / n, 1.0 - of_mean)
}

/// The correlation of neighbours whose blocks show `ratio` of products to squares: the mean that is
/// taken out of each block biases the plain ratio downward (Kendall 1954 to first order; here exactly
/// for a first-order autoregression).
pub fn correlation(ratio: f64) -> f64 {
    let shown = |rho: f64| {
        let (products, squares) = expected(rho);
        products / squares
    };
    let (mut low, mut high) = (-0.95, 0.99);
    for _ in 0..50 {
        let middle = 0.5 * (low + high);
        if shown(middle) < ratio {
            low = middle;
        } else {
            high = middle;
        }
    }
    0.5 * (low + high)
}

/// How much smaller squares about a block's mean are than n - 1 times the variance, for dependent
/// values.
pub fn squares_kept(rho: f64) -> f64 {
    let n = f64::from(CYCLES);
    expected(rho).1 * n / (n - 1.0)
}
