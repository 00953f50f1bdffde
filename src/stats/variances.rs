//! Which source is erratic? Extreme variances, and each spread against the rest.

use super::deviations::{Deviation, each_against_rest_from};
use super::dist::{beta, maximum_f_ratio};
use super::spread::{brown_forsythe_summaries, variances};
use super::summary::checked_summaries;
use super::{Degenerate, Df, Test};

/// Largest over smallest sample variance against the distribution of the maximum F ratio.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct VarianceRatio {
    /// The ratio and its upper tail over all k sources (Hartley 1950), exact for unequal counts too.
    pub test: Test,
    /// Source with the largest variance.
    pub largest: usize,
    /// Source with the smallest variance.
    pub smallest: usize,
}

/// Hartley's (1950) maximum F ratio, Biometrika 37, 308–312.
///
/// The p-value is that of the largest ratio among k sources, not of a two-source F. Sensitive to
/// departures from normality, like Bartlett. Error within 1e-11. The test's `df` is that of the
/// sources with the largest and the smallest variance.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, fewer than two values in one, a source without spread,
/// and NaN or infinite values.
pub fn max_f_ratio(groups: &[&[f64]]) -> Result<VarianceRatio, Degenerate> {
    let summaries = checked_summaries(groups, 2)?;
    let variances = variances(&summaries)?;
    let (mut largest, mut smallest) = (0, 0);
    for (i, v) in variances.iter().enumerate() {
        largest = if *v > variances[largest] { i } else { largest };
        smallest = if *v < variances[smallest] {
            i
        } else {
            smallest
        };
    }
    let dfs: Vec<f64> = summaries.iter().map(|s| (s.n - 1) as f64).collect();
    let statistic = variances[largest] / variances[smallest];
    let p = maximum_f_ratio::sf(statistic, &dfs)?;
    let test = Test {
        statistic,
        df: Df::Two(dfs[largest], dfs[smallest]),
        p,
    };
    Ok(VarianceRatio {
        test,
        largest,
        smallest,
    })
}

/// Cochran's (1941) C: the largest variance over the sum of all, for equal counts.
///
/// p = k P(B > C), B beta with shapes v/2 and (k-1) v/2, v = n - 1: exact from C = 1/2 on, where two
/// sources cannot both exceed it, and an upper bound below (Cochran 1941, Ann. Eugenics 11, 47–52;
/// ISO 5725-2). At most 1.
///
/// # Errors
/// [`Degenerate`] as [`max_f_ratio`], and for unequal counts.
pub fn cochran_c(groups: &[&[f64]]) -> Result<Test, Degenerate> {
    let summaries = checked_summaries(groups, 2)?;
    if summaries.iter().any(|s| s.n != summaries[0].n) {
        return Err(Degenerate::UnequalCounts);
    }
    let variances = variances_some(&summaries)?;
    let k = variances.len() as f64;
    let df = (summaries[0].n - 1) as f64;
    let statistic = variances.iter().copied().fold(0.0, f64::max) / variances.iter().sum::<f64>();
    let p = (k * beta::sf(statistic, 0.5 * df, 0.5 * (k - 1.0) * df)?).min(1.0);
    Ok(Test {
        statistic,
        df: Df::Two(df, (k - 1.0) * df),
        p,
    })
}

/// Variances of which some may be zero, but not all.
fn variances_some(summaries: &[super::Summary]) -> Result<Vec<f64>, Degenerate> {
    if summaries.iter().all(|s| s.ss == 0.0) {
        return Err(super::level::no_spread(summaries));
    }
    Ok(summaries
        .iter()
        .map(|s| s.variance().unwrap_or(0.0))
        .collect())
}

/// Names the erratic source: each mean absolute deviation from the source's own median against the
/// mean of the others', with Welch errors and Holm's adjustment.
///
/// The follow-up of [`super::brown_forsythe`]; differences are in the values' unit.
///
/// # Errors
/// As [`super::brown_forsythe`], and for alpha outside (0, 1).
pub fn spread_against_rest(groups: &[&[f64]], alpha: f64) -> Result<Vec<Deviation>, Degenerate> {
    each_against_rest_from(&brown_forsythe_summaries(groups)?, alpha)
}
