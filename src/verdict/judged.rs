//! Who stands apart: from the largest even set, or from the reference source.

use crate::stats::dist::maximum::Maximum;
use crate::stats::{Side, dist};

use super::errors::Errors;
use super::even::{Means, NAMING_ALPHA};
use super::level::{against, others};

/// Rounds of naming again; two are usual.
const MOST_ROUNDS: usize = 5;

/// The even set and the most striking comparison.
pub struct Judged {
    /// Who belongs to the even set.
    pub even: Vec<bool>,
    /// Smallest probability of a comparison as far beyond its margin.
    pub pair_p: f64,
    /// Largest comparison beyond its margin on the studentized range's scale: sqrt(2) times the
    /// distance over its standard error.
    pub largest: f64,
}

impl Judged {
    /// Every pair of sources; a pair's margin is the larger one of the two.
    pub fn every_pair(means: &[f64], errors: &Errors, margins: &[f64]) -> Self {
        let margin = |i: usize, j: usize| margins[i].max(margins[j]);
        let all = Means {
            means,
            error: &|i, j| errors.of(i, j),
            margin: &margin,
        };
        let k = means.len();
        let pairs = (0..k).flat_map(|i| (i + 1..k).map(move |j| (i, j)));
        Self {
            even: if margins.iter().all(|m| *m == 0.0) {
                retested(all.even_set(NAMING_ALPHA), means, errors)
            } else {
                all.even_set(NAMING_ALPHA)
            },
            pair_p: all.smallest_p(),
            largest: largest(pairs, means, errors, &margin),
        }
    }

    /// Every source against the reference (Dunnett 1955), `n` values each, distances counted beyond the
    /// margin. The reference belongs to the even set.
    pub fn against(
        reference: usize,
        n: &[usize],
        means: &[f64],
        errors: &Errors,
        margins: &[f64],
    ) -> Self {
        let margin = |i: usize, j: usize| margins[i].max(margins[j]);
        let k = means.len();
        let others = || (0..k).filter(move |i| *i != reference);
        let sizes: Vec<usize> = others().map(|i| n[i]).collect();
        let maximum = Maximum::dunnett(n[reference], &sizes, Side::Both).ok();
        let p = |i: usize| {
            let (std_error, df) = errors.of(i, reference);
            let beyond = (means[i] - means[reference]).abs() - margin(i, reference);
            let maximum = maximum.as_ref().filter(|_| beyond > 0.0 && std_error > 0.0);
            let tail = maximum.and_then(|m| m.sf(beyond / std_error, df.max(1.0)).ok());
            tail.unwrap_or(1.0)
        };
        let each: Vec<f64> = (0..k)
            .map(|i| if i == reference { 1.0 } else { p(i) })
            .collect();
        Self {
            even: each.iter().map(|p| *p >= NAMING_ALPHA).collect(),
            pair_p: each.iter().copied().fold(1.0, f64::min),
            largest: largest(others().map(|i| (i, reference)), means, errors, &margin),
        }
    }
}

/// Every source again against the mean of the even set without itself (Bonferroni at the naming's error
/// rate), until nothing changes. The largest run of neighbours may hold some that moved and leave out the
/// far end of those that did not; against their mean both come right. With a margin the mean is no
/// yardstick, because sources may lastingly stand on either side of it.
fn retested(mut even: Vec<bool>, means: &[f64], errors: &Errors) -> Vec<bool> {
    let k = means.len();
    if k < 3 {
        return even;
    }
    for _ in 0..MOST_ROUNDS {
        let is_even = |i: usize| {
            let set = others(&even, i);
            let weights = against(k, i, &set);
            let deviation: f64 = weights.iter().zip(means).map(|(w, m)| w * m).sum();
            let t = deviation.abs() / errors.of_contrast(&weights).max(0.0).sqrt();
            let df = errors.of(i, set[0]).1;
            t.is_nan() || 2.0 * k as f64 * dist::t::sf(t, df).unwrap_or(1.0) >= NAMING_ALPHA
        };
        let again: Vec<bool> = (0..k).map(is_even).collect();
        let members = again.iter().filter(|e| **e).count();
        // Whoever would be left without a majority to stand on has no better yardstick.
        if again == even || 2 * members < k.min(2 * even.iter().filter(|e| **e).count()) {
            break;
        }
        even = again;
    }
    even
}

fn largest(
    pairs: impl Iterator<Item = (usize, usize)>,
    means: &[f64],
    errors: &Errors,
    margin: &dyn Fn(usize, usize) -> f64,
) -> f64 {
    let beyond = |(i, j): (usize, usize)| {
        ((means[i] - means[j]).abs() - margin(i, j)).max(0.0) / errors.of(i, j).0
    };
    std::f64::consts::SQRT_2 * pairs.map(beyond).fold(0.0, f64::max)
}
