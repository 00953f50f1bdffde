//! The studentized range: largest minus smallest of k independent standard normals, divided by an
//! independent chi over the root of its degrees of freedom. The distribution behind Tukey–Kramer
//! and Games–Howell.
//!
//! P(Q > q) = E R_k(q s), R_k the upper tail of the range (Copenhaver and Holland 1988 for the
//! form). The quadrature is ours and works on the upper tail itself:
//! The average over the chi is taken by the rule the studentized maxima share; ln of R_k, scaled,
//! lives in one table per k, built on first use and kept for the life of the process: a pure
//! function of k.

mod table;

use super::root::brent;
use super::{OutOfReach, degrees, f, normal, outer, probability, t};
use std::collections::BTreeMap;
use std::sync::{Arc, PoisonError, RwLock};
pub use table::RangeTable;

/// The largest k for which tables are built; the tests reach to it.
pub const MOST_SOURCES: usize = 500;

static TABLES: RwLock<BTreeMap<usize, Arc<RangeTable>>> = RwLock::new(BTreeMap::new());

/// The table of the range of `k` normals, built on first use (a few milliseconds) and then shared.
///
/// # Errors
/// [`OutOfReach`] unless 2 <= k <= [`MOST_SOURCES`].
pub fn table(k: usize) -> Result<Arc<RangeTable>, OutOfReach> {
    if !(2..=MOST_SOURCES).contains(&k) {
        return Err(OutOfReach::Argument(
            "the studentized range needs 2 to 500 sources",
        ));
    }
    if let Some(found) = TABLES
        .read()
        .unwrap_or_else(PoisonError::into_inner)
        .get(&k)
    {
        return Ok(Arc::clone(found));
    }
    let built = Arc::new(RangeTable::build(k));
    let mut tables = TABLES.write().unwrap_or_else(PoisonError::into_inner);
    Ok(Arc::clone(tables.entry(k).or_insert(built)))
}

/// Upper tail P(Q > q) of the studentized range of `k` means with `df` degrees of freedom.
///
/// Relative error at most 1e-12 for k 2 to 200, df 1 to 1e6 and infinity, q from 0.02, tails from
/// 0.5 down to 1e-12 (tests/certified has the measured figure). `q` at or below 0 gives 1.
///
/// # Errors
/// [`OutOfReach`] for NaN, df below 1, and k outside 2 to [`MOST_SOURCES`].
pub fn sf(q: f64, k: usize, df: f64) -> Result<f64, OutOfReach> {
    table(k)?.sf(q, df)
}

/// Lower tail P(Q <= q) = 1 - [`sf`]. Absolute error at most 1e-13; a lower tail that small has lost
/// its digits.
///
/// # Errors
/// As [`sf`].
pub fn cdf(q: f64, k: usize, df: f64) -> Result<f64, OutOfReach> {
    Ok(1.0 - sf(q, k, df)?)
}

/// The q whose upper tail is `p`. Relative error at most 1e-12.
///
/// # Errors
/// [`OutOfReach`] unless 0 < p < 1, and as [`sf`].
pub fn isf(p: f64, k: usize, df: f64) -> Result<f64, OutOfReach> {
    table(k)?.isf(p, df)
}

impl RangeTable {
    /// Upper tail P(Q > q): [`sf`] with the table at hand, for many values of one k.
    ///
    /// # Errors
    /// As [`sf`].
    pub fn sf(&self, q: f64, df: f64) -> Result<f64, OutOfReach> {
        if q.is_nan() {
            return Err(OutOfReach::NotANumber);
        }
        let df = degrees(df)?;
        if df < 1.0 {
            return Err(OutOfReach::Argument(
                "the studentized range needs at least 1 degree of freedom",
            ));
        }
        if q <= 0.0 {
            return Ok(1.0);
        }
        if q == f64::INFINITY {
            return Ok(0.0);
        }
        if self.k() == 2 {
            return two_means(q, df);
        }
        if df == f64::INFINITY {
            return Ok(self.tail.tail(q));
        }
        Ok(outer::tail(&self.tail, q, df).clamp(0.0, 1.0))
    }

    /// The q whose upper tail is `p`: [`isf`] with the table at hand.
    ///
    /// # Errors
    /// As [`isf`].
    pub fn isf(&self, p: f64, df: f64) -> Result<f64, OutOfReach> {
        let p = probability(p)?;
        if self.k() == 2 {
            return Ok(t::isf(0.5 * p, df)? * std::f64::consts::SQRT_2);
        }
        if p <= 0.5
            && let Some(near) = self.near(p, df)?
        {
            return Ok(near);
        }
        // Bonferroni over all ordered pairs bounds q from above; one pair bounds it from below.
        let k = self.k() as f64;
        let share = p / (k * (k - 1.0));
        let high = t::isf(share, df)? * std::f64::consts::SQRT_2 * (1.0 + 1e-9);
        let low = (t::isf(0.5 * p, df)? * std::f64::consts::SQRT_2 * (1.0 - 1e-9)).max(1e-12);
        if p > 0.5 {
            // The lower tail decides, where the upper one is flat.
            return brent(low, high, |q| Ok(self.sf(q, df)? - p));
        }
        let goal = p.ln();
        let root = brent(low.ln(), high.ln(), |ln_q| {
            Ok(self.sf(ln_q.exp(), df)?.ln() - goal)
        })?;
        Ok(root.exp())
    }

    /// The quantile by the secant method in logarithms, from the quantile for infinite df carried over
    /// by Fisher's expansion of t in z (Abramowitz and Stegun 26.7.5). None where that start is poor.
    fn near(&self, p: f64, df: f64) -> Result<Option<f64>, OutOfReach> {
        if df < 8.0 {
            return Ok(None);
        }
        let goal = p.ln();
        let scaled = |q: f64| self.tail.tail(q).max(1e-307).ln() - goal;
        let unlimited = brent(1e-3, 55.0, |q| Ok(scaled(q)))?;
        if df == f64::INFINITY {
            return Ok(Some(unlimited));
        }
        let z = unlimited / std::f64::consts::SQRT_2;
        let cubic = z * (z * z + 1.0) / (4.0 * df);
        let quintic = z * ((5.0 * z * z + 16.0) * z * z + 3.0) / (96.0 * df * df);
        let mut q = (z + cubic + quintic) * std::f64::consts::SQRT_2;
        let mut slope = scaled(unlimited * 1.001) / 1.001_f64.ln() / (1.0 + 0.5 * q * q / df);
        let mut miss = self.sf(q, df)?.ln() - goal;
        for _ in 0..8 {
            let step = -miss / slope;
            if !step.is_finite() || step.abs() > 0.5 {
                return Ok(None);
            }
            q *= step.exp();
            if step.abs() < 1e-9 {
                return Ok(Some(q));
            }
            let next = self.sf(q, df)?.ln() - goal;
            slope = (next - miss) / step;
            miss = next;
            if miss == 0.0 {
                return Ok(Some(q));
            }
        }
        Ok(None)
    }
}

/// For two means the range is |N(0, 2)|: Student's t in closed form.
fn two_means(q: f64, df: f64) -> Result<f64, OutOfReach> {
    let t = q / std::f64::consts::SQRT_2;
    if df == f64::INFINITY {
        Ok(2.0 * normal::sf(t))
    } else if t < 1e140 {
        f::sf(0.5 * q * q, 1.0, df)
    } else {
        t::two_sided(t, df)
    }
}
