//! Two sources apart in opposite directions: the quantile of the range beyond the margin at the worst
//! offsets that the margin allows.
//!
//! The studentized range bounds it for every allowed set. With a margin only a source of the group at the
//! margin against one of the rest is close to it, so the union bound over ordered pairs is smaller from
//! some window length on, and the smaller is taken. Its tails are convex in the offsets, so the worst set
//! is a corner, a group of g at the margin; and since Φ(−x) + Φ(−x − 2y) ≥ 2 Φ(−x − y), it is g = k/2.

use super::solve::falling_root;
use super::tails::{ln_sf, t_of_normal};
use crate::stats::dist::{normal, studentized_range};
use std::f64::consts::{FRAC_1_SQRT_2, SQRT_2};

/// The studentized range quantile; for more sources than its tables hold by Bonferroni over pairs.
pub fn range_quantile(alpha: f64, sources: usize, df: f64) -> f64 {
    let pairs = |k: f64| normal::isf(alpha / (k * (k - 1.0)));
    let bound = || pairs(sources.max(2) as f64).map(|z| SQRT_2 * t_of_normal(z, df));
    let exact = studentized_range::isf(alpha, sources.max(2), df);
    // Unreachable for alpha in [1e-15, 1/2]; a bound on the safe side.
    exact.or_else(|_| bound()).unwrap_or(60.0)
}

/// The quantile of (max − min − m)+ √n/sigma at the tail probability `alpha`, `reach` being m √n/sigma of
/// the window and `df` the degrees of freedom of sigma.
pub fn quantile(alpha: f64, sources: usize, reach: f64, df: f64) -> f64 {
    let range = range_quantile(alpha, sources, df);
    let union = SQRT_2 * t_of_normal(union(alpha, sources, reach), df);
    union.min(range)
}

/// The z of one pair at which the union bound of the worst set is `alpha`.
fn union(alpha: f64, sources: usize, reach: f64) -> f64 {
    let k = sources as f64;
    let group = (sources / 2) as f64;
    let across = group * (k - group);
    let within = k * (k - 1.0) - 2.0 * across;
    let beyond = reach * FRAC_1_SQRT_2;
    let start = normal::isf((alpha / across).min(0.5)).unwrap_or(0.0);
    falling_root((0.0, 60.0), start, |z| {
        let tail = |x: f64| ln_sf(x).exp();
        let all = across * (tail(z) + tail(z + 2.0 * beyond)) + within * tail(z + beyond);
        (all / alpha).ln()
    })
}
