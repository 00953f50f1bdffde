//! Do successive values of a source resemble each other, and what that costs.
//!
//! A lag-one correlation of 0.5 turns a test at 5 % into one at 69 %; so variances are enlarged by
//! (1 + phi)/(1 - phi), the variance of the mean of a first-order autoregression over that of
//! independent values (Bayley and Hammersley 1946).

use crate::stats;

use super::Dependence;

/// Values are centred on the mean of stretches this long, so that a lasting change of level does not
/// pass for dependence.
const STRETCH: usize = 50;

/// A stretch shorter than this says nothing of its own.
const SHORTEST: usize = 8;

/// Fewer neighbouring pairs than this are not worth an estimate.
const FEWEST_PAIRS: usize = 40;

/// The upper 80 % limit of a normal estimate lies this many standard errors above it; what is not
/// yet known well is paid for.
const UPPER_80: f64 = 0.8416;

/// No factor above this: beyond it the window holds no information anyway.
const LARGEST_PHI: f64 = 0.99;

/// Pooled lag-one correlation of columns of residuals (paired) or values (not paired), oldest first.
/// `None` where there is too little to tell.
pub fn estimate(columns: &[Vec<f64>]) -> Option<Dependence> {
    let stretches: Vec<&[f64]> = columns
        .iter()
        .flat_map(|c| c.rchunks(STRETCH))
        .filter(|s| s.len() >= SHORTEST)
        .collect();
    let lag = stats::lag_one(&stretches).ok()?;
    if lag.n < FEWEST_PAIRS {
        return None;
    }
    let phi = lag.bias_corrected();
    let paid = (phi + UPPER_80 * lag.std_error).clamp(0.0, LARGEST_PHI);
    Some(Dependence {
        phi,
        std_error: lag.std_error,
        variance_factor: (1.0 + paid) / (1.0 - paid),
    })
}
