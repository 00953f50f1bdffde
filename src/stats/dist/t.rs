//! Student's t distribution with real degrees of freedom; infinite ones give the normal.

use super::{OutOfReach, degrees, f, normal, probability};

/// |t| beyond which t^2 would leave the range of `f64`.
const FAR: f64 = 1e140;

/// Upper tail P(T > t). Relative error at most 1e-12 down to 1e-100.
///
/// # Errors
/// [`OutOfReach`] for NaN and for df that is not positive.
pub fn sf(t: f64, df: f64) -> Result<f64, OutOfReach> {
    let (lower, upper) = sides(t.abs(), df)?;
    Ok(if t >= 0.0 { upper } else { lower })
}

/// Lower tail P(T <= t), as accurate as [`sf`].
///
/// # Errors
/// As [`sf`].
pub fn cdf(t: f64, df: f64) -> Result<f64, OutOfReach> {
    sf(-t, df)
}

/// Both tails together: P(|T| > |t|).
///
/// # Errors
/// As [`sf`].
pub fn two_sided(t: f64, df: f64) -> Result<f64, OutOfReach> {
    sides(t.abs(), df).map(|(_, upper)| 2.0 * upper)
}

fn sides(t: f64, df: f64) -> Result<(f64, f64), OutOfReach> {
    if t.is_nan() {
        return Err(OutOfReach::NotANumber);
    }
    let df = degrees(df)?;
    if df == f64::INFINITY {
        return Ok((normal::cdf(t), normal::sf(t)));
    }
    let upper = if t > FAR && t.is_finite() {
        f::far_tail(2.0 * t.ln(), 1.0, df).upper
    } else {
        f::tails(t * t, 1.0, df)?.upper
    };
    Ok((1.0 - 0.5 * upper, 0.5 * upper))
}

/// The t whose upper tail is `p`. Relative error at most 1e-12 away from the median.
///
/// # Errors
/// [`OutOfReach`] unless 0 < p < 1 and df is positive.
pub fn isf(p: f64, df: f64) -> Result<f64, OutOfReach> {
    let p = probability(p)?;
    if p > 0.5 {
        upper(1.0 - p, df).map(|t| -t)
    } else {
        upper(p, df)
    }
}

/// The t whose lower tail is `p`.
///
/// # Errors
/// As [`isf`].
pub fn quantile(p: f64, df: f64) -> Result<f64, OutOfReach> {
    isf(p, df).map(|t| -t)
}

fn upper(p: f64, df: f64) -> Result<f64, OutOfReach> {
    if degrees(df)? == f64::INFINITY {
        return normal::isf(p);
    }
    if p == 0.5 {
        return Ok(0.0);
    }
    f::isf(2.0 * p, 1.0, df).map(f64::sqrt)
}
