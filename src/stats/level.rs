//! Are the sources alike in level? One-way ANOVA and Welch's test.

use super::dist::f;
use super::summary::checked_summaries;
use super::{Degenerate, Df, Summary, Test};

/// One-way analysis of variance with the parts a report shows.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Anova {
    /// F with its degrees of freedom and upper tail.
    pub test: Test,
    /// Sum of squares between the sources, in the unit squared.
    pub ss_between: f64,
    /// Sum of squares within them.
    pub ss_within: f64,
    /// Pooled variance, ss_within / (N - k).
    pub ms_within: f64,
    /// Share of the variance that lies between sources (Hays 1963), 0 when the estimate is negative.
    pub omega_squared: f64,
}

/// One-way ANOVA: F = (SSB/(k-1)) / (SSW/(N-k)), NIST/SEMATECH e-Handbook 1.3.5.4.
///
/// All values are taken about the first one, so a large common level costs no digits. Two sources
/// give the square of the pooled t. Error: sums of squares to the last digits of exact arithmetic
/// on the same `f64` values, p within 1e-12.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, an empty one, N = k, NaN or infinite values, all
/// values equal, and no spread within any source.
pub fn anova(groups: &[&[f64]]) -> Result<Anova, Degenerate> {
    anova_from(&checked_summaries(groups, 1)?)
}

/// [`anova`] from summaries, whose means must be relative to one origin.
///
/// # Errors
/// As [`anova`].
pub fn anova_from(summaries: &[Summary]) -> Result<Anova, Degenerate> {
    let (k, total) = counts(summaries, 1)?;
    if total == k {
        return Err(Degenerate::TooFewValues {
            source: 0,
            needed: 2,
        });
    }
    let (df1, df2) = ((k - 1) as f64, (total - k) as f64);
    let ss_between = between(summaries, |s| s.n as f64);
    let ss_within: f64 = summaries.iter().map(|s| s.ss).sum();
    if ss_within == 0.0 {
        return Err(no_spread(summaries));
    }
    let ms_within = ss_within / df2;
    let statistic = ss_between / df1 / ms_within;
    let omega = (ss_between - df1 * ms_within) / (ss_between + ss_within + ms_within);
    Ok(Anova {
        test: f_test(statistic, df1, df2)?,
        ss_between,
        ss_within,
        ms_within,
        omega_squared: omega.max(0.0),
    })
}

/// Welch's (1951) test for levels when spreads differ (Biometrika 38, 330–336).
///
/// w_i = n_i / s_i^2; F = [sum w_i (m_i - m)^2 / (k-1)] / [1 + 2 (k-2) L / (k^2-1)] with
/// L = sum (1 - w_i/W)^2 / (n_i - 1), on k - 1 and (k^2 - 1) / (3 L) degrees of freedom. Two
/// sources give the square of Welch's t. Error within 1e-12 of exact arithmetic.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, fewer than two values in one, a source without
/// spread, and NaN or infinite values.
pub fn welch(groups: &[&[f64]]) -> Result<Test, Degenerate> {
    welch_from(&checked_summaries(groups, 2)?)
}

/// [`welch`] from summaries (variances possibly inflated for dependence by the caller).
///
/// # Errors
/// As [`welch`].
pub fn welch_from(summaries: &[Summary]) -> Result<Test, Degenerate> {
    let (k, _) = counts(summaries, 2)?;
    if summaries.iter().all(|s| s.ss == 0.0) {
        return Err(no_spread(summaries));
    }
    if let Some(source) = summaries.iter().position(|s| s.ss == 0.0) {
        return Err(Degenerate::ZeroSpread { source });
    }
    let weight = |s: &Summary| s.n as f64 * (s.n - 1) as f64 / s.ss;
    let whole: f64 = summaries.iter().map(weight).sum();
    let k = k as f64;
    let lambda: f64 = summaries
        .iter()
        .map(|s| (1.0 - weight(s) / whole).powi(2) / (s.n - 1) as f64)
        .sum();
    let above = between(summaries, weight) / (k - 1.0);
    let below = 1.0 + 2.0 * (k - 2.0) * lambda / (k * k - 1.0);
    f_test(above / below, k - 1.0, (k * k - 1.0) / (3.0 * lambda))
}

/// Weighted sum of squared deviations of the means from their weighted mean.
fn between(summaries: &[Summary], weight: impl Fn(&Summary) -> f64) -> f64 {
    let origin = summaries[0].mean;
    let whole: f64 = summaries.iter().map(&weight).sum();
    let centre = summaries
        .iter()
        .map(|s| weight(s) * (s.mean - origin))
        .sum::<f64>()
        / whole;
    summaries
        .iter()
        .map(|s| weight(s) * ((s.mean - origin) - centre).powi(2))
        .sum()
}

/// Number of sources and of all values, each source having at least `needed`.
pub(super) fn counts(summaries: &[Summary], needed: usize) -> Result<(usize, usize), Degenerate> {
    if summaries.len() < 2 {
        return Err(Degenerate::FewerThanTwoSources);
    }
    if let Some(source) = summaries.iter().position(|s| s.n < needed) {
        return Err(Degenerate::TooFewValues { source, needed });
    }
    if summaries
        .iter()
        .any(|s| !s.mean.is_finite() || !s.ss.is_finite())
    {
        return Err(Degenerate::NotFinite);
    }
    Ok((summaries.len(), summaries.iter().map(|s| s.n).sum()))
}

/// The outcome when no source varies within itself.
pub(super) fn no_spread(summaries: &[Summary]) -> Degenerate {
    if summaries.iter().all(|s| s.mean == summaries[0].mean) {
        Degenerate::AllEqual
    } else {
        Degenerate::ZeroSpreadWithin
    }
}

/// An F statistic with its upper tail.
pub(super) fn f_test(statistic: f64, df1: f64, df2: f64) -> Result<Test, Degenerate> {
    let p = f::sf(statistic, df1, df2)?;
    Ok(Test {
        statistic,
        df: Df::Two(df1, df2),
        p,
    })
}
