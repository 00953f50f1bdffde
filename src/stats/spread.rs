//! Are the sources alike in spread? Brown–Forsythe, Levene about the mean, Bartlett.

use super::dist::chi_square;
use super::summary::{check, summarize_about};
use super::{Anova, Degenerate, Df, Summary, Test, anova_from, median, summarize};

/// Brown and Forsythe (1974): one-way ANOVA on absolute deviations from each source's median.
///
/// JASA 69, 364–367; NIST/SEMATECH e-Handbook 1.3.5.10. The error is that of [`super::anova`].
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, fewer than two values in one, NaN or infinite values,
/// all values equal, and deviations that do not vary within any source.
pub fn brown_forsythe(groups: &[&[f64]]) -> Result<Test, Degenerate> {
    brown_forsythe_summaries(groups)
        .and_then(|s| anova_from(&s))
        .map(|a: Anova| a.test)
}

/// The summaries of absolute deviations from each source's median that Brown–Forsythe compares.
///
/// In the values' unit, about 0. For Games–Howell on the same deviations, which names the source.
///
/// # Errors
/// As [`brown_forsythe`], except that deviations without spread are no error.
pub fn brown_forsythe_summaries(groups: &[&[f64]]) -> Result<Vec<Summary>, Degenerate> {
    let origin = check(groups, 2)?;
    let mut buffer = Vec::new();
    Ok(groups
        .iter()
        .map(|group| {
            buffer.clear();
            buffer.extend(group.iter().map(|v| v - origin));
            let centre = median(&mut buffer);
            for v in &mut buffer {
                *v = (*v - centre).abs();
            }
            summarize(&buffer)
        })
        .collect())
}

/// Levene (1960): one-way ANOVA on absolute deviations from each source's mean.
///
/// NIST/SEMATECH e-Handbook 1.3.5.10. Less robust than [`brown_forsythe`] for skewed values.
///
/// # Errors
/// As [`brown_forsythe`].
pub fn levene_mean(groups: &[&[f64]]) -> Result<Test, Degenerate> {
    let origin = check(groups, 2)?;
    let mut buffer = Vec::new();
    let summaries: Vec<Summary> = groups
        .iter()
        .map(|group| {
            let centre = summarize_about(group, origin).mean;
            buffer.clear();
            buffer.extend(group.iter().map(|v| ((v - origin) - centre).abs()));
            summarize(&buffer)
        })
        .collect();
    anova_from(&summaries).map(|a| a.test)
}

/// Bartlett (1937): likelihood ratio of equal variances, corrected; chi-square with k - 1 df.
///
/// NIST/SEMATECH e-Handbook 1.3.5.7. Sensitive to departures from normality. The logarithms are
/// taken of the ratios to the pooled variance. Error within 1e-12 of exact arithmetic, relative to
/// the sum of the terms.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, fewer than two values in one, a source without
/// spread, and NaN or infinite values.
pub fn bartlett(groups: &[&[f64]]) -> Result<Test, Degenerate> {
    let origin = check(groups, 2)?;
    let summaries: Vec<Summary> = groups.iter().map(|g| summarize_about(g, origin)).collect();
    let variances = variances(&summaries)?;
    let k = variances.len() as f64;
    let df = |i: usize| (summaries[i].n - 1) as f64;
    let whole: f64 = (0..variances.len()).map(df).sum();
    let pooled = summaries.iter().map(|s| s.ss).sum::<f64>() / whole;
    let above: f64 = (0..variances.len())
        .map(|i| -df(i) * (variances[i] / pooled).ln())
        .sum();
    let inverses: f64 = (0..variances.len()).map(|i| 1.0 / df(i)).sum();
    let correction = 1.0 + (inverses - 1.0 / whole) / (3.0 * (k - 1.0));
    let statistic = (above / correction).max(0.0);
    Ok(Test {
        statistic,
        df: Df::One(k - 1.0),
        p: chi_square::sf(statistic, k - 1.0)?,
    })
}

/// Sample variances, all of them positive.
pub(super) fn variances(summaries: &[Summary]) -> Result<Vec<f64>, Degenerate> {
    if summaries.iter().all(|s| s.ss == 0.0) {
        return Err(super::level::no_spread(summaries));
    }
    summaries
        .iter()
        .enumerate()
        .map(|(source, s)| match s.variance() {
            None => Err(Degenerate::TooFewValues { source, needed: 2 }),
            Some(0.0) => Err(Degenerate::ZeroSpread { source }),
            Some(v) => Ok(v),
        })
        .collect()
}
