//! The outer integral over the chi, by the trapezoid rule.

use super::super::kernel::{deviance, stirling_error};
use super::RangeTable;
use std::f64::consts::PI;

/// From here on the peak is narrow and nearly normal: the step follows its width.
const NARROW_DF: f64 = 40.0;
/// Exponents below this are beneath the last digit.
const CUT: f64 = -42.0;

/// P(Q > q) for q > 0, df >= 1 finite and k >= 3.
pub(super) fn tail(table: &RangeTable, q: f64, df: f64) -> f64 {
    let z = q * q / (2.0 * df);
    let w0 = q / (1.0 + z).sqrt();
    let ln_front = -0.5 * df * z.ln_1p() - stirling_error(0.5 * df) + 0.5 * (df / PI).ln();
    let sum = if df >= NARROW_DF {
        narrow(table, w0, df)
    } else {
        broad(table, w0, df)
    };
    if z.is_infinite() {
        return 0.0;
    }
    (ln_front).exp() * sum
}

/// df >= 40: equal steps in y, scaled by the peak's width 1/sqrt(2 df).
fn narrow(table: &RangeTable, w0: f64, df: f64) -> f64 {
    let step = 0.5 / (2.0 * df).sqrt();
    let mut sum = 0.0;
    for j in -20..=20 {
        let y = f64::from(j) * step;
        let exponent = -0.5 * df * excess(y);
        sum += (exponent + table.ln_scaled(w0 * y.exp())).exp();
    }
    sum * step
}

/// df < 40: y = t - exp(-t) / 20, so that the long left side of a small df is crossed in few steps.
fn broad(table: &RangeTable, w0: f64, df: f64) -> f64 {
    const STEP: f64 = 0.05;
    let mut sum = 0.0;
    for j in -140..=60 {
        let t = f64::from(j) * STEP;
        let fall = 0.05 * (-t).exp();
        let y = t - fall;
        let exponent = -0.5 * df * excess(y);
        if exponent < CUT {
            continue;
        }
        sum += (exponent + table.ln_scaled(w0 * y.exp())).exp() * (1.0 + fall);
    }
    sum * STEP
}

/// exp(2y) - 1 - 2y.
fn excess(y: f64) -> f64 {
    let u = (2.0 * y).exp_m1();
    deviance(u, 1.0 + u)
}
