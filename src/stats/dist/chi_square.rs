//! The chi-square distribution with real degrees of freedom.

use super::kernel::{Tails, gamma_tails};
use super::root::{Side, newton};
use super::{OutOfReach, degrees, normal, probability};

fn tails(x: f64, df: f64) -> Result<Tails, OutOfReach> {
    if x.is_nan() {
        return Err(OutOfReach::NotANumber);
    }
    let df = degrees(df)?;
    if df == f64::INFINITY {
        return Err(OutOfReach::Argument(
            "chi-square needs finite degrees of freedom",
        ));
    }
    if x <= 0.0 {
        return Ok(Tails {
            lower: 0.0,
            upper: 1.0,
            x_density: 0.0,
        });
    }
    if x == f64::INFINITY {
        return Ok(Tails {
            lower: 1.0,
            upper: 0.0,
            x_density: 0.0,
        });
    }
    gamma_tails(0.5 * df, 0.5 * x)
}

/// Upper tail P(X > x). Relative error at most 1e-12 down to 1e-100.
///
/// # Errors
/// [`OutOfReach`] for NaN and for df that is not positive and finite.
pub fn sf(x: f64, df: f64) -> Result<f64, OutOfReach> {
    tails(x, df).map(|t| t.upper)
}

/// Lower tail P(X <= x), as accurate as [`sf`].
///
/// # Errors
/// As [`sf`].
pub fn cdf(x: f64, df: f64) -> Result<f64, OutOfReach> {
    tails(x, df).map(|t| t.lower)
}

/// The x whose upper tail is `p`. Relative error at most 1e-12.
///
/// # Errors
/// [`OutOfReach`] unless 0 < p < 1 and df is positive and finite.
pub fn isf(p: f64, df: f64) -> Result<f64, OutOfReach> {
    let p = probability(p)?;
    if p > 0.5 {
        from_lower(1.0 - p, df)
    } else {
        from_upper(p, df)
    }
}

/// The x whose lower tail is `p`.
///
/// # Errors
/// As [`isf`].
pub fn quantile(p: f64, df: f64) -> Result<f64, OutOfReach> {
    let p = probability(p)?;
    if p > 0.5 {
        from_upper(1.0 - p, df)
    } else {
        from_lower(p, df)
    }
}

fn from_upper(p: f64, df: f64) -> Result<f64, OutOfReach> {
    newton(Side::Upper, p.ln(), guess(p, df, 1.0)?, |x| {
        tails(x, df).map(|t| (t.upper.ln(), -t.x_density / t.upper))
    })
}

fn from_lower(p: f64, df: f64) -> Result<f64, OutOfReach> {
    newton(Side::Lower, p.ln(), guess(p, df, -1.0)?, |x| {
        tails(x, df).map(|t| (t.lower.ln(), t.x_density / t.lower))
    })
}

/// Wilson and Hilferty (1931), kept positive.
fn guess(p: f64, df: f64, side: f64) -> Result<f64, OutOfReach> {
    let df = degrees(df)?;
    let c = 2.0 / (9.0 * df);
    let root = 1.0 - c + side * normal::isf(p)? * c.sqrt();
    Ok(df * root.max(1e-3).powi(3))
}
