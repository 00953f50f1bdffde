//! The standard normal distribution.

use super::{OutOfReach, probability};
use std::f64::consts::{FRAC_1_SQRT_2, PI};

/// What `FRAC_1_SQRT_2` lacks of 1/sqrt(2).
const FRAC_1_SQRT_2_REST: f64 = -4.833_646_656_726_457e-17;

/// The density exp(-z^2/2)/sqrt(2 pi). Relative error below 1e-15 (1 + z^2).
pub fn pdf(z: f64) -> f64 {
    (-0.5 * z * z).exp() / (2.0 * PI).sqrt()
}

/// Upper tail P(Z > z). Relative error at most 1e-14 down to the smallest normal `f64`; NaN gives NaN.
///
/// The rounding of z/sqrt(2) is put back to first order: without it a tail of 1e-100 would be off
/// by 1e-13.
pub fn sf(z: f64) -> f64 {
    let scaled = z * FRAC_1_SQRT_2;
    if !scaled.is_finite() || scaled < -6.0 {
        return 0.5 * libm::erfc(scaled);
    }
    let rest = z.mul_add(FRAC_1_SQRT_2, -scaled) + z * FRAC_1_SQRT_2_REST;
    let slope = if scaled > 1.0 {
        // d ln erfc / dx = -2x (1 + 1/(2x^2) - …); the term beyond is below the rounding.
        libm::erfc(scaled) * -(2.0 * scaled + 1.0 / scaled)
    } else {
        -2.0 / PI.sqrt() * (-scaled * scaled).exp()
    };
    0.5 * (libm::erfc(scaled) + slope * rest)
}

/// exp(x^2/2) P(Z > x) for x >= 8, by its continued fraction (Abramowitz and Stegun 26.2.14).
pub(super) fn scaled_sf(x: f64) -> f64 {
    let mut fraction = x;
    for n in (1..40).rev() {
        fraction = x + f64::from(n) / fraction;
    }
    1.0 / (fraction * (2.0 * PI).sqrt())
}

/// Lower tail P(Z <= z), as accurate as [`sf`].
pub fn cdf(z: f64) -> f64 {
    sf(-z)
}

/// The z whose upper tail is `p`, 0 < p < 1. Relative error at most 1e-14 away from the median.
///
/// # Errors
/// [`OutOfReach`] unless 0 < p < 1.
pub fn isf(p: f64) -> Result<f64, OutOfReach> {
    let p = probability(p)?;
    if p > 0.5 {
        return Ok(-upper(1.0 - p));
    }
    Ok(upper(p))
}

/// The z whose lower tail is `p`.
///
/// # Errors
/// [`OutOfReach`] unless 0 < p < 1.
pub fn quantile(p: f64) -> Result<f64, OutOfReach> {
    isf(p).map(|z| -z)
}

/// Newton's method in ln tail, for p at most one half. Hastings' approximation (Abramowitz and
/// Stegun 26.2.23, error below 4.5e-4) starts it; ln of the tail is concave, so it cannot overshoot
/// for long.
fn upper(p: f64) -> f64 {
    if p == 0.5 {
        return 0.0;
    }
    let t = (-2.0 * p.ln()).sqrt();
    let above = 2.515_517 + t * (0.802_853 + t * 0.010_328);
    let below = 1.0 + t * (1.432_788 + t * (0.189_269 + t * 0.001_308));
    let mut z = t - above / below;
    for _ in 0..4 {
        let tail = sf(z);
        // ln(tail / p), accurate also when they nearly agree.
        let miss = ((tail - p) / p).ln_1p();
        z += miss * tail / pdf(z);
        if miss.abs() < 1e-15 {
            break;
        }
    }
    z
}
