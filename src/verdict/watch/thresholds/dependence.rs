//! What lag-one correlation costs beyond the larger variance.
//!
//! The streams multiply sigma² by (1 + phi)/(1 − phi), which is right for long sums and too much for
//! short ones, and correlated evaluations cluster more: with that alone the bank would call too rarely.
//! The mean cycles asked for are therefore divided by a factor.

/// From here on the factor is 2 (1 + phi)/(1 − phi).
const FULL: f64 = 0.2;

/// What the mean cycles to a false call are divided by: 1 at phi = 0, 2 (1 + phi)/(1 − phi) from 0.2 on,
/// in between the share phi/0.2 of the way (simulated, see the report of the tests). Negative
/// correlation is not paid out.
pub fn factor(phi: f64) -> f64 {
    let phi = phi.clamp(0.0, 0.99);
    let full = 2.0 * (1.0 + phi) / (1.0 - phi);
    1.0 + (full - 1.0) * (phi / FULL).min(1.0)
}

/// The lag-one correlation of scores of |e| when e has `phi`: phi² to within 0.02 (the second Hermite
/// term carries the scores of |e|).
pub fn score_phi(phi: f64) -> f64 {
    phi * phi
}
