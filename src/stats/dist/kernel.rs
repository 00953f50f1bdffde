//! The numerical heart of the beta and gamma families: saddle-point prefixes and the continued
//! fractions behind every F, t, beta and chi-square tail.
//!
//! The prefix x^a y^b / B(a, b) is formed from deviances and Stirling errors (Loader 2000, "Fast
//! and accurate computation of binomial probabilities"), because differences of log-gammas lose
//! digits at large parameters: its relative error stays a few units in the last place times the
//! size of the exponent.

use super::OutOfReach;
use std::f64::consts::PI;

/// Both tails of a distribution at one point, and the point's density times x.
///
/// `x_density` is what Newton's method needs in ln x: d ln sf / d ln x = -x_density / upper.
#[derive(Clone, Copy, Debug)]
pub(super) struct Tails {
    pub lower: f64,
    pub upper: f64,
    pub x_density: f64,
}

/// More steps than any argument in the tested reach needs; beyond it the result is refused.
const MOST_STEPS: usize = 2_000_000;

/// u - ln(1 + u) for `ratio` = 1 + u, both given because either may be the accurate one.
///
/// Near zero through the series of the inverse hyperbolic tangent, so that the result keeps its
/// relative accuracy. Relative error at most about 4 units in the last place.
pub(super) fn deviance(u: f64, ratio: f64) -> f64 {
    if !(-0.4..=0.6).contains(&u) {
        return u - ratio.ln();
    }
    let r = u / (2.0 + u);
    let r2 = r * r;
    let mut sum = 0.0;
    for odd in (0..14).rev() {
        sum = sum * r2 + 1.0 / f64::from(2 * odd + 3);
    }
    r * (u - 2.0 * r2 * sum)
}

/// ln Gamma(a + 1) minus Stirling's formula (a + 1/2) ln a - a + ln(2 pi) / 2, for a > 0.
///
/// Asymptotic series from a = 16 on (error below 1e-18), downward recurrence below.
pub(super) fn stirling_error(a: f64) -> f64 {
    if a == f64::INFINITY {
        return 0.0;
    }
    let mut lifted = a;
    let mut sum = 0.0;
    while lifted < 16.0 {
        sum += (lifted + 0.5) * (1.0 / lifted).ln_1p() - 1.0;
        lifted += 1.0;
    }
    let i2 = 1.0 / (lifted * lifted);
    let series = 1.0 / 12.0
        - i2 * (1.0 / 360.0
            - i2 * (1.0 / 1260.0
                - i2 * (1.0 / 1680.0 - i2 * (1.0 / 1188.0 - i2 * (691.0 / 360_360.0)))));
    sum + series / lifted
}

/// One point of a beta distribution, described so that nothing cancels.
pub(super) struct BetaPoint {
    pub a: f64,
    pub b: f64,
    pub x: f64,
    /// 1 - x.
    pub y: f64,
    /// (a + b) x / a - 1.
    pub u: f64,
    /// (a + b) y / b - 1.
    pub v: f64,
}

impl BetaPoint {
    /// The point of F/(F + d2/d1) for an F value with finite degrees of freedom.
    pub fn from_f(f: f64, d1: f64, d2: f64) -> Self {
        let whole = d1 * f + d2;
        Self {
            a: 0.5 * d1,
            b: 0.5 * d2,
            x: d1 * f / whole,
            y: d2 / whole,
            u: (f - 1.0) * d2 / whole,
            v: -d1 * (f - 1.0) / whole,
        }
    }

    /// The point x of the beta distribution itself.
    pub fn from_beta(x: f64, a: f64, b: f64) -> Self {
        let off = (a + b).mul_add(x, -a);
        Self {
            a,
            b,
            x,
            y: 1.0 - x,
            u: off / a,
            v: -off / b,
        }
    }

    fn mirrored(&self) -> Self {
        Self {
            a: self.b,
            b: self.a,
            x: self.y,
            y: self.x,
            u: self.v,
            v: self.u,
        }
    }

    /// x^a y^b / B(a, b).
    pub fn kernel(&self) -> f64 {
        let (a, b) = (self.a, self.b);
        let n = a + b;
        let exponent = a * deviance(self.u, n * self.x / a) + b * deviance(self.v, n * self.y / b);
        let stirling = stirling_error(n) - stirling_error(a) - stirling_error(b);
        (a / n * b / (2.0 * PI)).sqrt() * (stirling - exponent).exp()
    }

    /// The continued fraction whose inverse times the kernel is the lower tail (DiDonato and
    /// Morris 1992, eq. 8.1), by Lentz's method.
    fn fraction(&self) -> Result<f64, OutOfReach> {
        let (a, b, x) = (self.a, self.b, self.x);
        // a y - b x, from the deviation that does not cancel.
        let lambda = -a * self.u;
        let term = |m: f64| {
            let odd = a + 2.0 * m - 1.0;
            let numerator = (a + m - 1.0) / odd * ((a + b + m - 1.0) / odd) * (m * (b - m) * x * x);
            let denominator = m
                + m * (b - m) * x / odd
                + (a + m) * (lambda + 1.0 + m * (2.0 - x)) / (a + 2.0 * m + 1.0);
            (numerator, denominator)
        };
        let mut value = a * (lambda + 1.0) / (a + 1.0);
        let mut c = value;
        let mut d = 0.0;
        for step in 1..MOST_STEPS {
            let (an, bn) = term(step as f64);
            d = 1.0 / away_from_zero(bn + an * d);
            c = away_from_zero(bn + an / c);
            let delta = c * d;
            value *= delta;
            if (delta - 1.0).abs() < 2e-16 {
                return Ok(value);
            }
        }
        Err(OutOfReach::NotSettled("the fraction of the beta tail"))
    }

    /// Both tails. The tail on the far side of the mean is computed directly; the other one is its
    /// complement unless that would cost more than one digit, when it is computed directly too.
    pub fn tails(&self) -> Result<Tails, OutOfReach> {
        let kernel = self.kernel();
        let direct = |point: &Self| point.fraction().map(|f| (kernel / f).min(1.0));
        let (near, far, swapped) = if self.u <= 0.0 {
            (direct(self)?, self.mirrored(), false)
        } else {
            (direct(&self.mirrored())?, Self { ..*self }, true)
        };
        let other = if near > 0.9 {
            direct(&far)?
        } else {
            1.0 - near
        };
        let (lower, upper) = if swapped {
            (other, near)
        } else {
            (near, other)
        };
        Ok(Tails {
            lower,
            upper,
            x_density: kernel,
        })
    }
}

fn away_from_zero(value: f64) -> f64 {
    if value.abs() < 1e-300 { 1e-300 } else { value }
}

/// Both tails of the gamma distribution with shape `a` at `x` > 0.
pub(super) fn gamma_tails(a: f64, x: f64) -> Result<Tails, OutOfReach> {
    let u = (x - a) / a;
    let kernel = (a / (2.0 * PI)).sqrt() * (-stirling_error(a) - a * deviance(u, x / a)).exp();
    let (lower, upper) = if x < a + 1.0 {
        let lower = (kernel * gamma_series(a, x)?).min(1.0);
        // The complement may cost one digit and no more; below that the fraction answers.
        if lower > 0.9 && x > 0.5 {
            (lower, kernel * gamma_fraction(a, x)?)
        } else {
            (lower, 1.0 - lower)
        }
    } else {
        let upper = kernel * gamma_fraction(a, x)?;
        (1.0 - upper, upper)
    };
    Ok(Tails {
        lower,
        upper,
        x_density: kernel,
    })
}

/// Sum over n of x^n / (a (a+1) … (a+n)), Abramowitz and Stegun 6.5.29.
fn gamma_series(a: f64, x: f64) -> Result<f64, OutOfReach> {
    let mut term = 1.0 / a;
    let mut sum = term;
    for n in 1..MOST_STEPS {
        term *= x / (a + n as f64);
        sum += term;
        if term < sum * 1e-17 {
            return Ok(sum);
        }
    }
    Err(OutOfReach::NotSettled("the series of the gamma tail"))
}

/// The continued fraction of the upper gamma tail, Abramowitz and Stegun 6.5.31, by Lentz's method.
fn gamma_fraction(a: f64, x: f64) -> Result<f64, OutOfReach> {
    let mut b = x + 1.0 - a;
    let mut c = 1e300;
    let mut d = 1.0 / away_from_zero(b);
    let mut value = d;
    for n in 1..MOST_STEPS {
        let n = n as f64;
        let an = n * (a - n);
        b += 2.0;
        d = 1.0 / away_from_zero(an * d + b);
        c = away_from_zero(b + an / c);
        let delta = c * d;
        value *= delta;
        if (delta - 1.0).abs() < 2e-16 {
            return Ok(value);
        }
    }
    Err(OutOfReach::NotSettled("the fraction of the gamma tail"))
}
