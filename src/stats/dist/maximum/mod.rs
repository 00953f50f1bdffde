//! Studentized maxima: the largest of several correlated normals over one independent chi.
//!
//! | constructor | the maximum of | correlation |
//! | --- | --- | --- |
//! | [`Maximum::dunnett`] | differences from a control, either one-sided or absolute | lambda_i lambda_j, lambda_i = sqrt(n_i / (n_i + n_0)) |
//! | [`Maximum::means`] | absolute deviations of k equally sized means from their mean | -1/(k-1) |
//! | [`Maximum::modulus`] | absolute values of k independent normals | 0 |
//!
//! Each builds a table of the normal case once (`tail_table`); averages over the chi are
//! then as quick as those of the studentized range. Statistics are in standard errors, like t.

mod control;
mod means;

use super::root::upper_quantile;
use super::tail_table::TailTable;
use super::{OutOfReach, degrees, normal, outer, probability, t};
use control::Control;
use std::collections::BTreeMap;
use std::f64::consts::SQRT_2;
use std::sync::{Arc, PoisonError, RwLock};

/// Which deviations count.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Side {
    /// Either direction: the largest absolute value.
    Both,
    /// Upward only: the largest value.
    Upper,
}

/// The largest number of variables; the tests reach to it.
pub const MOST_VARIABLES: usize = 200;

/// The distribution of one studentized maximum.
pub struct Maximum {
    tail: TailTable,
    variables: usize,
    /// For negative arguments of a one-sided maximum.
    control: Option<Arc<Control>>,
}

impl Maximum {
    /// Dunnett's (1955) distribution for a control of `control` values and others of `others`.
    ///
    /// Relative error at most 1e-10 for equal counts, 1e-8 for unequal ones.
    ///
    /// # Errors
    /// [`OutOfReach`] for no others, more than [`MOST_VARIABLES`], a count of zero, or counts above
    /// 2500 times the control's.
    pub fn dunnett(control: usize, others: &[usize], side: Side) -> Result<Self, OutOfReach> {
        within_reach(others.len())?;
        let control = Arc::new(Control::new(control, others, side)?);
        let own = Arc::clone(&control);
        let tail = TailTable::build(others.len(), move |w| own.ln_scaled_tail(w / SQRT_2));
        let control = (side == Side::Upper).then_some(control);
        Ok(Self {
            tail,
            variables: others.len(),
            control,
        })
    }

    /// Analysis of means with `k` >= 3 equally sized sources (Nelson 1982, J. Quality Technology 14).
    ///
    /// Relative error at most 1e-10.
    ///
    /// # Errors
    /// [`OutOfReach`] for k outside 3 to [`MOST_VARIABLES`].
    pub fn means(k: usize) -> Result<Self, OutOfReach> {
        within_reach(k)?;
        if k < 3 {
            return Err(OutOfReach::Argument(
                "analysis of means needs at least 3 sources",
            ));
        }
        let tail = means::table(k);
        Ok(Self {
            tail,
            variables: k,
            control: None,
        })
    }

    /// The maximum modulus of `k` independent normals (Stoline and Ury 1979); by Šidák's (1967)
    /// inequality an upper bound of the tail for any correlation.
    ///
    /// # Errors
    /// [`OutOfReach`] for k of 0 or above [`MOST_VARIABLES`].
    pub fn modulus(k: usize) -> Result<Self, OutOfReach> {
        within_reach(k)?;
        let count = k as f64;
        let tail = TailTable::build(k, move |w| {
            let one = 2.0 * normal::sf(w / SQRT_2);
            if one < 1e-30 {
                return (2.0 * count * normal::scaled_sf(w / SQRT_2)).ln();
            }
            (-(count * (-one).ln_1p()).exp_m1()).ln() + 0.25 * w * w
        });
        Ok(Self {
            tail,
            variables: k,
            control: None,
        })
    }

    /// Upper tail P(maximum > t) with `df` degrees of freedom of the common error.
    ///
    /// # Errors
    /// [`OutOfReach`] for NaN and df below 1.
    pub fn sf(&self, t: f64, df: f64) -> Result<f64, OutOfReach> {
        if t.is_nan() {
            return Err(OutOfReach::NotANumber);
        }
        if degrees(df)? < 1.0 {
            return Err(OutOfReach::Argument(
                "a studentized maximum needs at least 1 degree of freedom",
            ));
        }
        if t <= 0.0 {
            return Ok(self.at_or_below_zero(t, df));
        }
        if t == f64::INFINITY {
            return Ok(0.0);
        }
        if df == f64::INFINITY {
            return Ok(self.tail.tail(t * SQRT_2));
        }
        Ok(outer::tail(&self.tail, t * SQRT_2, df).min(1.0))
    }

    /// Lower tail P(maximum <= t) = 1 - [`Self::sf`], with an absolute error of at most 1e-12.
    ///
    /// # Errors
    /// As [`Self::sf`].
    pub fn cdf(&self, t: f64, df: f64) -> Result<f64, OutOfReach> {
        Ok(1.0 - self.sf(t, df)?)
    }

    /// The t whose upper tail is `p`.
    ///
    /// # Errors
    /// [`OutOfReach`] unless 0 < p < 1, and as [`Self::sf`].
    pub fn isf(&self, p: f64, df: f64) -> Result<f64, OutOfReach> {
        let p = probability(p)?;
        degrees(df)?;
        let all = self.variables as f64;
        // One variable bounds the quantile from below, Bonferroni from above.
        let (low, high) = if self.control.is_some() {
            (t::isf(p, df)?, t::isf(p / all, df)?)
        } else {
            (t::isf(0.5 * p, df)?, t::isf(0.5 * p / all, df)?)
        };
        if high - low < 1e-13 * high.abs() {
            return Ok(high);
        }
        let room = 1e-9 * (1.0 + high.abs());
        upper_quantile(p, low - room, high + room, |t| self.sf(t, df))
    }

    fn at_or_below_zero(&self, t: f64, df: f64) -> f64 {
        match &self.control {
            None => 1.0,
            Some(_) if t == f64::NEG_INFINITY => 1.0,
            Some(control) => {
                1.0 - outer::average(self.variables, df, |s| control.lower_tail(t * s))
                    .clamp(0.0, 1.0)
            }
        }
    }
}

static MEANS: RwLock<BTreeMap<usize, Arc<Maximum>>> = RwLock::new(BTreeMap::new());

/// [`Maximum::means`] of `k`, built on first use and kept for the life of the process (k of 5 to 7 takes
/// some tenths of a second): a pure function of k.
///
/// # Errors
/// As [`Maximum::means`].
pub fn shared_means(k: usize) -> Result<Arc<Maximum>, OutOfReach> {
    if let Some(found) = MEANS.read().unwrap_or_else(PoisonError::into_inner).get(&k) {
        return Ok(Arc::clone(found));
    }
    let built = Arc::new(Maximum::means(k)?);
    let mut all = MEANS.write().unwrap_or_else(PoisonError::into_inner);
    Ok(Arc::clone(all.entry(k).or_insert(built)))
}

fn within_reach(variables: usize) -> Result<(), OutOfReach> {
    if (1..=MOST_VARIABLES).contains(&variables) {
        Ok(())
    } else {
        Err(OutOfReach::Argument(
            "a studentized maximum needs 1 to 200 variables",
        ))
    }
}
