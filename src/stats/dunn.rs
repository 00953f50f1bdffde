//! Which sources differ, by ranks: Dunn's test.

use super::adjust::holm;
use super::dist::normal;
use super::order::midranks;
use super::summary::check;
use super::{Degenerate, Pair};

/// Dunn (1964), Technometrics 6, 241–252: all pairs of mean ranks, ties corrected, Holm adjusted.
///
/// z = (r_a - r_b) / sqrt((N(N+1)/12 - sum(t^3 - t)/(12(N-1))) (1/n_a + 1/n_b)), two-sided normal.
/// `difference` and `std_error` are in ranks, `df` is infinite.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, an empty one, NaN or infinite values, all equal.
pub fn dunn(groups: &[&[f64]]) -> Result<Vec<Pair>, Degenerate> {
    check(groups, 1)?;
    let (ranks, ties) = midranks(&groups.concat());
    let n = ranks.len() as f64;
    let variance = n * (n + 1.0) / 12.0 - ties / (12.0 * (n - 1.0));
    let mut from = 0;
    let mut means = Vec::with_capacity(groups.len());
    for group in groups {
        let own = &ranks[from..from + group.len()];
        from += group.len();
        means.push(own.iter().sum::<f64>() / group.len() as f64);
    }
    let mut pairs = Vec::new();
    for a in 0..groups.len() {
        for b in a + 1..groups.len() {
            let sizes = 1.0 / groups[a].len() as f64 + 1.0 / groups[b].len() as f64;
            let (difference, std_error) = (means[a] - means[b], (variance * sizes).sqrt());
            let p_adjusted = 2.0 * normal::sf((difference / std_error).abs());
            pairs.push(Pair {
                a,
                b,
                difference,
                std_error,
                df: f64::INFINITY,
                p_adjusted,
            });
        }
    }
    let raw: Vec<f64> = pairs.iter().map(|p| p.p_adjusted).collect();
    for (pair, p) in pairs.iter_mut().zip(holm(&raw)) {
        pair.p_adjusted = p;
    }
    Ok(pairs)
}

/// Bonferroni's simultaneous interval of one pair's difference in mean ranks, among `pairs` pairs.
///
/// # Errors
/// [`Degenerate`] unless 0 < alpha < 1 and there is a pair.
pub fn dunn_interval(pair: &Pair, pairs: usize, alpha: f64) -> Result<(f64, f64), Degenerate> {
    let half = normal::isf(0.5 * alpha / pairs as f64)? * pair.std_error;
    Ok((pair.difference - half, pair.difference + half))
}
