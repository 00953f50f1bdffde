//! Fisher's F distribution with real degrees of freedom, either of which may be infinite.

use super::kernel::{BetaPoint, Tails, stirling_error};
use super::root::{Side, newton};
use super::{OutOfReach, chi_square, degrees, normal, probability};
use std::f64::consts::PI;

/// Beyond this value the leading term of the tail is exact to the last digit.
const FAR: f64 = 1e280;

pub(super) fn tails(f: f64, d1: f64, d2: f64) -> Result<Tails, OutOfReach> {
    if f.is_nan() {
        return Err(OutOfReach::NotANumber);
    }
    let (d1, d2) = (degrees(d1)?, degrees(d2)?);
    if f <= 0.0 {
        return Ok(Tails {
            lower: 0.0,
            upper: 1.0,
            x_density: 0.0,
        });
    }
    if f == f64::INFINITY {
        return Ok(Tails {
            lower: 1.0,
            upper: 0.0,
            x_density: 0.0,
        });
    }
    match (d1.is_finite(), d2.is_finite()) {
        (true, true) if f > FAR => Ok(far_tail(f.ln(), d1, d2)),
        (true, true) => BetaPoint::from_f(f, d1, d2).tails(),
        (true, false) => super::kernel::gamma_tails(0.5 * d1, 0.5 * d1 * f),
        (false, true) => super::kernel::gamma_tails(0.5 * d2, 0.5 * d2 / f).map(|t| Tails {
            lower: t.upper,
            upper: t.lower,
            x_density: t.x_density,
        }),
        (false, false) => Err(OutOfReach::Argument(
            "F needs at least one finite number of degrees of freedom",
        )),
    }
}

/// The leading term y^b / (b B(a, b)) of the tail at a huge F, given as its logarithm.
pub(super) fn far_tail(ln_f: f64, d1: f64, d2: f64) -> Tails {
    let (a, b) = (0.5 * d1, 0.5 * d2);
    let n = a + b;
    let ln_y = d2.ln() - d1.ln() - ln_f;
    let ln_inverse_beta = 0.5 * (a / n * b / (2.0 * PI)).ln() + stirling_error(n)
        - stirling_error(a)
        - stirling_error(b)
        + a * (n / a).ln()
        + b * (n / b).ln();
    let kernel = (b * ln_y + ln_inverse_beta).exp();
    Tails {
        lower: 1.0,
        upper: kernel / b,
        x_density: kernel,
    }
}

/// Upper tail P(F > f) with `d1` and `d2` degrees of freedom. Relative error at most 1e-12 down to
/// 1e-100; f at or below 0 gives 1.
///
/// # Errors
/// [`OutOfReach`] for NaN, for degrees of freedom that are not positive, and when both are infinite.
pub fn sf(f: f64, d1: f64, d2: f64) -> Result<f64, OutOfReach> {
    tails(f, d1, d2).map(|t| t.upper)
}

/// Lower tail P(F <= f), as accurate as [`sf`].
///
/// # Errors
/// As [`sf`].
pub fn cdf(f: f64, d1: f64, d2: f64) -> Result<f64, OutOfReach> {
    tails(f, d1, d2).map(|t| t.lower)
}

/// The f whose upper tail is `p`. Relative error at most 1e-12.
///
/// # Errors
/// [`OutOfReach`] unless 0 < p < 1 and the degrees of freedom are valid for [`sf`].
pub fn isf(p: f64, d1: f64, d2: f64) -> Result<f64, OutOfReach> {
    let p = probability(p)?;
    if p > 0.5 {
        from_lower(1.0 - p, d1, d2)
    } else {
        from_upper(p, d1, d2)
    }
}

/// The f whose lower tail is `p`.
///
/// # Errors
/// As [`isf`].
pub fn quantile(p: f64, d1: f64, d2: f64) -> Result<f64, OutOfReach> {
    let p = probability(p)?;
    if p > 0.5 {
        from_upper(1.0 - p, d1, d2)
    } else {
        from_lower(p, d1, d2)
    }
}

fn from_upper(p: f64, d1: f64, d2: f64) -> Result<f64, OutOfReach> {
    newton(Side::Upper, p.ln(), guess(p, d1, d2)?, |f| {
        tails(f, d1, d2).map(|t| (t.upper.ln(), -t.x_density / t.upper))
    })
}

fn from_lower(p: f64, d1: f64, d2: f64) -> Result<f64, OutOfReach> {
    newton(Side::Lower, p.ln(), 1.0 / guess(p, d2, d1)?, |f| {
        tails(f, d1, d2).map(|t| (t.lower.ln(), t.x_density / t.lower))
    })
}

/// Paulson's (1942) approximation: F^(1/3) compared with 1, where it has a root; the far tail's
/// power law otherwise.
fn guess(p: f64, d1: f64, d2: f64) -> Result<f64, OutOfReach> {
    if d2 == f64::INFINITY && d1.is_finite() {
        return chi_square::isf(p, d1).map(|x| x / d1);
    }
    let z = normal::isf(p)?;
    let (c1, c2) = (2.0 / (9.0 * d1), 2.0 / (9.0 * d2));
    let square = (1.0 - c2).powi(2) - z * z * c2;
    if square > 0.05 {
        let inner = c1 * (1.0 - c2).powi(2) + c2 * (1.0 - c1).powi(2) - z * z * c1 * c2;
        let root = ((1.0 - c1) * (1.0 - c2) + z * inner.max(0.0).sqrt()) / square;
        return Ok(root.max(1e-3).powi(3));
    }
    // ln of F where the leading term of the tail equals p.
    let unit = far_tail(0.0, d1, d2).upper.max(1e-300).ln();
    Ok(((unit - p.ln()) * 2.0 / d2)
        .clamp(-600.0, 600.0)
        .exp()
        .max(1.0))
}
