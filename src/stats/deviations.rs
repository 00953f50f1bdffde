//! Each source against something: a control (Dunnett), the common mean (analysis of means), the rest.

use super::adjust::holm;
use super::dist::maximum::{Maximum, Side, shared_means};
use super::dist::t;
use super::level::{counts, no_spread};
use super::summary::checked_summaries;
use super::{Degenerate, Summary};
use std::sync::Arc;

/// How far one source is from what it is compared with.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Deviation {
    /// Index of the source.
    pub source: usize,
    /// Its mean less what it is compared with, in the unit.
    pub difference: f64,
    /// Standard error of the difference, in the unit.
    pub std_error: f64,
    /// Degrees of freedom of the standard error.
    pub df: f64,
    /// p-value adjusted for the family of all sources compared.
    pub p_adjusted: f64,
    /// Lower end of the simultaneous interval; minus infinity never occurs except one-sided.
    pub low: f64,
    /// Upper end of the simultaneous interval; infinite for an upper-sided comparison.
    pub high: f64,
}

/// Dunnett (1955), JASA 50, 1096–1121: every source against a control, pooled variance.
///
/// Exact for equal and unequal counts, [`Side::Both`] or [`Side::Upper`] (source above control).
/// Intervals are simultaneous at level 1 - `alpha`. p within 1e-10 (equal counts) or 1e-8.
///
/// # Errors
/// [`Degenerate`] as [`super::anova`], for a control outside the list, for alpha outside (0, 1) and
/// for more sources than [`Maximum`] reaches.
pub fn dunnett(
    groups: &[&[f64]],
    control: usize,
    side: Side,
    alpha: f64,
) -> Result<Vec<Deviation>, Degenerate> {
    dunnett_from(&checked_summaries(groups, 1)?, control, side, alpha)
}

/// [`dunnett`] from summaries (variances possibly inflated by the caller).
///
/// # Errors
/// As [`dunnett`].
pub fn dunnett_from(
    summaries: &[Summary],
    control: usize,
    side: Side,
    alpha: f64,
) -> Result<Vec<Deviation>, Degenerate> {
    let (variance, df) = pooled(summaries)?;
    let base = summaries.get(control).ok_or(Degenerate::ShapeMismatch)?;
    let others: Vec<usize> = (0..summaries.len()).filter(|&i| i != control).collect();
    let sizes: Vec<usize> = others.iter().map(|&i| summaries[i].n).collect();
    let maximum = Maximum::dunnett(base.n, &sizes, side)?;
    let critical = maximum.isf(alpha, df)?;
    others
        .into_iter()
        .map(|source| {
            let own = &summaries[source];
            let difference = own.mean - base.mean;
            let std_error = (variance * (1.0 / own.n as f64 + 1.0 / base.n as f64)).sqrt();
            let statistic = difference / std_error;
            let (statistic, high) = match side {
                Side::Both => (statistic.abs(), difference + critical * std_error),
                Side::Upper => (statistic, f64::INFINITY),
            };
            Ok(Deviation {
                source,
                difference,
                std_error,
                df,
                p_adjusted: maximum.sf(statistic, df)?,
                low: difference - critical * std_error,
                high,
            })
        })
        .collect()
}

/// Analysis of means: every source against the common mean.
#[derive(Clone, Debug, PartialEq)]
pub struct MeansAnalysis {
    /// One entry per source.
    pub deviations: Vec<Deviation>,
    /// The mean of all values, relative to the first value of the first source.
    pub centre: f64,
    /// Whether p and intervals are exact (equal counts) or conservative (unequal counts).
    pub exact: bool,
}

/// Analysis of means (Ott 1967; exact critical values Nelson 1982): each mean against the mean of all.
///
/// Equal counts: exact, correlation -1/(k-1), p within 1e-10. Unequal counts: the maximum modulus by
/// Šidák's inequality, conservative, and `exact` says so. Two sources reduce to Student's t.
///
/// # Errors
/// [`Degenerate`] as [`super::anova`], for alpha outside (0, 1), and for more sources than
/// [`Maximum`] reaches.
pub fn analysis_of_means(groups: &[&[f64]], alpha: f64) -> Result<MeansAnalysis, Degenerate> {
    analysis_of_means_from(&checked_summaries(groups, 1)?, alpha)
}

/// [`analysis_of_means`] from summaries; `centre` is then in the terms of their means.
///
/// # Errors
/// As [`analysis_of_means`].
pub fn analysis_of_means_from(
    summaries: &[Summary],
    alpha: f64,
) -> Result<MeansAnalysis, Degenerate> {
    let (variance, df) = pooled(summaries)?;
    let k = summaries.len();
    let total: f64 = summaries.iter().map(|s| s.n as f64).sum();
    let centre = summaries.iter().map(|s| s.n as f64 * s.mean).sum::<f64>() / total;
    let exact = summaries.iter().all(|s| s.n == summaries[0].n);
    let maximum = match (exact, k) {
        // Both deviations are equal in size: one t.
        (_, 2) => Arc::new(Maximum::modulus(1)?),
        (true, _) => shared_means(k)?,
        (false, _) => Arc::new(Maximum::modulus(k)?),
    };
    let critical = maximum.isf(alpha, df)?;
    let deviations = summaries.iter().enumerate().map(|(source, own)| {
        let n = own.n as f64;
        let difference = own.mean - centre;
        let std_error = (variance * (total - n) / (total * n)).sqrt();
        Ok(Deviation {
            source,
            difference,
            std_error,
            df,
            p_adjusted: maximum.sf(difference.abs() / std_error, df)?,
            low: difference - critical * std_error,
            high: difference + critical * std_error,
        })
    });
    let deviations = deviations.collect::<Result<_, Degenerate>>()?;
    Ok(MeansAnalysis {
        deviations,
        centre,
        exact: exact || k == 2,
    })
}

/// Each source against the mean of the other sources' means, with Welch errors and Holm's adjustment.
///
/// se^2 = s_i^2/n_i + sum over the others of s_j^2/n_j / (k-1)^2, df after Welch and Satterthwaite
/// (Welch 1947, Biometrika 34, 28–35). Intervals are Bonferroni's at level 1 - `alpha` together.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, fewer than two values in one, NaN or infinite values,
/// all equal, no spread in any source, and alpha outside (0, 1).
pub fn each_against_rest(groups: &[&[f64]], alpha: f64) -> Result<Vec<Deviation>, Degenerate> {
    each_against_rest_from(&checked_summaries(groups, 2)?, alpha)
}

/// [`each_against_rest`] from summaries (variances possibly inflated by the caller).
///
/// # Errors
/// As [`each_against_rest`].
pub fn each_against_rest_from(
    summaries: &[Summary],
    alpha: f64,
) -> Result<Vec<Deviation>, Degenerate> {
    let (k, _) = counts(summaries, 2)?;
    if !(alpha > 0.0 && alpha < 1.0) {
        return Err(Degenerate::NotAProbability);
    }
    let own = |s: &Summary| s.ss / (s.n as f64 * (s.n - 1) as f64);
    let all: f64 = summaries.iter().map(own).sum();
    if all == 0.0 {
        return Err(no_spread(summaries));
    }
    let share = 1.0 / ((k - 1) as f64);
    let mut out = Vec::with_capacity(k);
    for (source, s) in summaries.iter().enumerate() {
        // Differences first: the means may share a large level.
        let apart = summaries.iter().map(|o| s.mean - o.mean).sum::<f64>() * share;
        let parts = summaries.iter().enumerate().map(|(j, o)| {
            let factor = if j == source { 1.0 } else { share * share };
            (factor * own(o), (o.n - 1) as f64)
        });
        let (variance, spread) = parts.fold((0.0, 0.0), |(v, w), (part, df)| {
            (v + part, w + part * part / df)
        });
        let (std_error, df) = (variance.sqrt(), variance * variance / spread);
        let half = t::isf(0.5 * alpha / k as f64, df)? * std_error;
        out.push(Deviation {
            source,
            difference: apart,
            std_error,
            df,
            p_adjusted: t::two_sided(apart / std_error, df)?,
            low: apart - half,
            high: apart + half,
        });
    }
    let raw: Vec<f64> = out.iter().map(|d| d.p_adjusted).collect();
    for (deviation, p) in out.iter_mut().zip(holm(&raw)) {
        deviation.p_adjusted = p;
    }
    Ok(out)
}

/// Pooled variance and its degrees of freedom.
fn pooled(summaries: &[Summary]) -> Result<(f64, f64), Degenerate> {
    let (k, total) = counts(summaries, 1)?;
    if total == k {
        return Err(Degenerate::TooFewValues {
            source: 0,
            needed: 2,
        });
    }
    let ss: f64 = summaries.iter().map(|s| s.ss).sum();
    if ss == 0.0 {
        return Err(no_spread(summaries));
    }
    let df = (total - k) as f64;
    Ok((ss / df, df))
}
