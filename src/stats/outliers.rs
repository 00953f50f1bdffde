//! Outliers and ties within one source.

use super::Degenerate;
use super::dist::t;
use super::order::{mad, median_of};
use super::summary::{check_finite, spread_in_range, summarize};

/// A value far from the others.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Outlier {
    /// Index of the value.
    pub index: usize,
    /// Its deviation in (robust) standard deviations, with sign.
    pub score: f64,
}

/// Values whose distance from the median exceeds `cut` robust sds, 1.4826 MAD each (Hampel 1974).
///
/// In the order of the values. Iglewicz and Hoaglin (1993) advise a cut of 3.5.
///
/// # Errors
/// [`Degenerate`] for fewer than 3 values, NaN or infinite ones, and a MAD of zero (more than half
/// of the values equal the median).
pub fn median_outliers(values: &[f64], cut: f64) -> Result<Vec<Outlier>, Degenerate> {
    if values.len() < 3 {
        return Err(Degenerate::TooFewValues {
            source: 0,
            needed: 3,
        });
    }
    check_finite(&[values])?;
    let centre = median_of(values);
    let scale = 1.482_602_218_505_602 * mad(values);
    if scale == 0.0 {
        return Err(Degenerate::ZeroSpread { source: 0 });
    }
    let scores = values.iter().map(|v| (v - centre) / scale).enumerate();
    Ok(scores
        .filter(|(_, score)| score.abs() > cut)
        .map(|(index, score)| Outlier { index, score })
        .collect())
}

/// One step of the generalised extreme studentized deviate test.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EsdStep {
    /// Index of the most extreme value left.
    pub index: usize,
    /// Its distance from the mean of the values left, in their sd.
    pub statistic: f64,
    /// The critical value at this step.
    pub critical: f64,
}

/// The generalised ESD test.
#[derive(Clone, Debug, PartialEq)]
pub struct Esd {
    /// One step per suspected outlier.
    pub steps: Vec<EsdStep>,
    /// How many of them are outliers: the largest step whose statistic exceeds its critical value.
    pub outliers: usize,
}

/// Generalised ESD for up to `most` outliers (Rosner 1983, Technometrics 25, 165–172; NIST/SEMATECH
/// e-Handbook 1.3.5.17.3), two-sided at level `alpha`. Good for 25 values and more.
///
/// Fewer steps when the values left do not vary.
///
/// # Errors
/// [`Degenerate`] for fewer than `most` + 3 values, NaN or infinite ones, all equal, alpha outside (0, 1).
pub fn generalised_esd(values: &[f64], most: usize, alpha: f64) -> Result<Esd, Degenerate> {
    let n = values.len();
    if n < most + 3 {
        return Err(Degenerate::TooFewValues {
            source: 0,
            needed: most + 3,
        });
    }
    check_finite(&[values])?;
    let low = values.iter().copied().fold(f64::INFINITY, f64::min);
    let high = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    spread_in_range(low, high)?;
    let mut left: Vec<(usize, f64)> = values.iter().map(|v| v - values[0]).enumerate().collect();
    let mut steps = Vec::with_capacity(most);
    for step in 1..=most {
        let plain: Vec<f64> = left.iter().map(|(_, v)| *v).collect();
        let summary = summarize(&plain);
        let Some(sd) = summary.sd().filter(|sd| *sd > 0.0) else {
            break;
        };
        let far = |v: f64| (v - summary.mean).abs();
        let mut place = 0;
        for (i, v) in plain.iter().enumerate() {
            place = if far(*v) > far(plain[place]) {
                i
            } else {
                place
            };
        }
        let (index, value) = left.remove(place);
        let m = (n - step + 1) as f64;
        let quantile = t::isf(0.5 * alpha / m, m - 2.0)?;
        let critical = (m - 1.0) * quantile / ((m - 2.0 + quantile * quantile) * m).sqrt();
        steps.push(EsdStep {
            index,
            statistic: far(value) / sd,
            critical,
        });
    }
    let outliers = steps
        .iter()
        .rposition(|s| s.statistic > s.critical)
        .map_or(0, |i| i + 1);
    Ok(Esd { steps, outliers })
}

/// How coarse values are.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Ties {
    /// Share of values that equal some other value, 0 to 1.
    pub share: f64,
    /// Number of distinct values.
    pub distinct: usize,
    /// The resolution in sds of the values; rounding adds its square over twelve to the variance.
    /// None when no resolution is given or the values do not vary.
    pub resolution_sds: Option<f64>,
}

/// Share of ties, beside the resolution (the step in which values are recorded, in their unit).
///
/// # Errors
/// [`Degenerate`] for fewer than two values, and NaN or infinite ones.
pub fn ties(values: &[f64], resolution: Option<f64>) -> Result<Ties, Degenerate> {
    if values.len() < 2 {
        return Err(Degenerate::TooFewValues {
            source: 0,
            needed: 2,
        });
    }
    check_finite(&[values])?;
    let mut sorted = values.to_vec();
    sorted.sort_unstable_by(f64::total_cmp);
    let runs = sorted.chunk_by(|a, b| a == b);
    let (mut distinct, mut tied) = (0, 0);
    for run in runs {
        distinct += 1;
        tied += if run.len() > 1 { run.len() } else { 0 };
    }
    let sd = summarize(values)
        .sd()
        .filter(|sd| *sd > 0.0 && sd.is_finite());
    Ok(Ties {
        share: tied as f64 / values.len() as f64,
        distinct,
        resolution_sds: resolution.zip(sd).map(|(r, sd)| r / sd),
    })
}
