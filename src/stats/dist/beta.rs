//! The beta distribution.

use super::kernel::{BetaPoint, Tails};
use super::root::{Side, newton};
use super::{DEGREES, OutOfReach, probability};

fn tails(x: f64, a: f64, b: f64) -> Result<Tails, OutOfReach> {
    if x.is_nan() || a.is_nan() || b.is_nan() {
        return Err(OutOfReach::NotANumber);
    }
    let sane = |shape: f64| DEGREES.contains(&(2.0 * shape));
    if !sane(a) || !sane(b) {
        return Err(OutOfReach::Argument(
            "beta shapes must lie between 0.0005 and 5e11",
        ));
    }
    if x <= 0.0 {
        return Ok(Tails {
            lower: 0.0,
            upper: 1.0,
            x_density: 0.0,
        });
    }
    if x >= 1.0 {
        return Ok(Tails {
            lower: 1.0,
            upper: 0.0,
            x_density: 0.0,
        });
    }
    BetaPoint::from_beta(x, a, b).tails()
}

/// Upper tail P(X > x) with shapes a and b. Relative error at most 1e-12 down to 1e-100.
///
/// # Errors
/// [`OutOfReach`] for NaN and for shapes that are not positive and finite.
pub fn sf(x: f64, a: f64, b: f64) -> Result<f64, OutOfReach> {
    tails(x, a, b).map(|t| t.upper)
}

/// Lower tail P(X <= x), as accurate as [`sf`].
///
/// # Errors
/// As [`sf`].
pub fn cdf(x: f64, a: f64, b: f64) -> Result<f64, OutOfReach> {
    tails(x, a, b).map(|t| t.lower)
}

/// The x whose upper tail is `p`. Relative error at most 1e-12, of 1 - x too where `f64` can hold it.
///
/// # Errors
/// [`OutOfReach`] unless 0 < p < 1 and both shapes are positive and finite.
pub fn isf(p: f64, a: f64, b: f64) -> Result<f64, OutOfReach> {
    let p = probability(p)?;
    tails(0.5, a, b)?;
    // Through F = (x/a)/((1-x)/b), which resolves both ends.
    let f = super::f::isf(p, 2.0 * a, 2.0 * b)?;
    Ok(a * f / (a * f + b))
}

/// The x whose lower tail is `p`.
///
/// # Errors
/// As [`isf`].
pub fn quantile(p: f64, a: f64, b: f64) -> Result<f64, OutOfReach> {
    let p = probability(p)?;
    tails(0.5, a, b)?;
    let f = super::f::quantile(p, 2.0 * a, 2.0 * b)?;
    let start = a * f / (a * f + b);
    if p < 0.5 && start < 0.5 {
        // One polishing pass in x itself.
        return newton(Side::Lower, p.ln(), start, |x| {
            tails(x, a, b).map(|t| (t.lower.ln(), t.x_density / ((1.0 - x) * t.lower)))
        });
    }
    Ok(start)
}
