//! Roots of monotone tails, in logarithms: the solvers behind every quantile.

use super::OutOfReach;

/// Which tail is to be solved.
#[derive(Clone, Copy, PartialEq, Eq)]
pub(super) enum Side {
    /// Rising in x.
    Lower,
    /// Falling in x.
    Upper,
}

/// Solves ln tail(x) = `goal` for x > 0 by Newton's method in ln x inside a shrinking bracket.
///
/// `tail` gives ln tail and its slope in ln x (of constant sign). Steps multiply x, so a quantile
/// of 1e-200 keeps its relative accuracy.
pub(super) fn newton(
    side: Side,
    goal: f64,
    guess: f64,
    tail: impl Fn(f64) -> Result<(f64, f64), OutOfReach>,
) -> Result<f64, OutOfReach> {
    let mut x = guess.clamp(1e-290, 1e290);
    let (mut low, mut high) = (0.0_f64, f64::INFINITY);
    for _ in 0..400 {
        let (value, slope) = tail(x)?;
        let miss = goal - value;
        if miss == 0.0 {
            return Ok(x);
        }
        // A lower tail that is too small lies on the left of its quantile, an upper one on the right.
        if (miss > 0.0) == (side == Side::Lower) {
            low = x;
        } else {
            high = x;
        }
        let step = miss / slope;
        let newton = x * step.clamp(-30.0, 30.0).exp();
        let inside = step.is_finite() && newton > low && newton < high;
        if step.is_finite() && step.abs() < 1e-9 {
            return Ok(x * (1.0 + step));
        }
        x = if inside { newton } else { between(low, high) };
        if high.is_finite() && low > 0.0 && high / low - 1.0 < 4e-16 {
            return Ok(x);
        }
    }
    Err(OutOfReach::NotSettled("the quantile"))
}

/// The geometric middle of a bracket that may be open on either side.
fn between(low: f64, high: f64) -> f64 {
    match (low > 0.0, high.is_finite()) {
        (true, true) => low.sqrt() * high.sqrt(),
        (true, false) => (low * 1e4).min(1e300),
        (false, true) => (high * 1e-4).max(1e-300),
        (false, false) => 1.0,
    }
}

/// The zero of `f` between `low` and `high`, where it changes sign (Brent 1973, chapter 4).
pub(super) fn brent(
    mut low: f64,
    mut high: f64,
    f: impl Fn(f64) -> Result<f64, OutOfReach>,
) -> Result<f64, OutOfReach> {
    let (mut f_low, mut f_high) = (f(low)?, f(high)?);
    if f_low * f_high > 0.0 {
        return Err(OutOfReach::Argument(
            "the quantile lies outside the tested range",
        ));
    }
    let (mut third, mut f_third) = (low, f_low);
    let (mut step, mut before) = (high - low, high - low);
    for _ in 0..200 {
        if f_third.abs() < f_high.abs() {
            (low, high, third) = (high, third, high);
            (f_low, f_high, f_third) = (f_high, f_third, f_high);
        }
        let tolerance = 2.0 * f64::EPSILON * high.abs() + 1e-18;
        let half = 0.5 * (third - high);
        if half.abs() <= tolerance || f_high == 0.0 {
            return Ok(high);
        }
        let mut trial = half;
        let mut interpolated = false;
        if before.abs() >= tolerance && f_low.abs() > f_high.abs() {
            let s = f_high / f_low;
            let (mut p, mut q) = if low == third {
                (2.0 * half * s, 1.0 - s)
            } else {
                let (q, r) = (f_low / f_third, f_high / f_third);
                (
                    s * (2.0 * half * q * (q - r) - (high - low) * (r - 1.0)),
                    (q - 1.0) * (r - 1.0) * (s - 1.0),
                )
            };
            if p > 0.0 {
                q = -q;
            }
            p = p.abs();
            if 2.0 * p < (3.0 * half * q - (tolerance * q).abs()).min((before * q).abs()) {
                trial = p / q;
                interpolated = true;
            }
        }
        before = if interpolated { step } else { half };
        step = trial;
        (low, f_low) = (high, f_high);
        high += if step.abs() > tolerance {
            step
        } else {
            tolerance.copysign(half)
        };
        f_high = f(high)?;
        if (f_high > 0.0) == (f_third > 0.0) {
            (third, f_third) = (low, f_low);
            step = high - low;
            before = step;
        }
    }
    Err(OutOfReach::NotSettled("the quantile"))
}

/// The x between `low` and `high` where the falling `tail` equals `p`, by [`brent`] on its logarithm.
pub(super) fn upper_quantile(
    p: f64,
    low: f64,
    high: f64,
    tail: impl Fn(f64) -> Result<f64, OutOfReach>,
) -> Result<f64, OutOfReach> {
    let goal = p.ln();
    brent(low, high, |x| Ok(tail(x)?.max(1e-307).ln() - goal))
}
