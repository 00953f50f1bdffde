//! Before trusting a setting: power, sample size and the smallest deviation that is found.
//!
//! Deviations and spreads are in the same unit; only their ratio counts.

use super::dist::{f, noncentral_f};
use super::{Degenerate, Summary};

/// Power of one-way ANOVA at level `alpha`: `deviations` of the true source means from anything common,
/// `n` values per source, common `sd`.
///
/// Noncentral F with lambda = n sum (d_i - mean)^2 / sd^2 (Scheffé 1959, section 2.8). Error 1e-9.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, n below 2, sd not positive, alpha outside (0, 1), or a
/// noncentrality beyond 1e6.
pub fn anova_power(deviations: &[f64], n: usize, sd: f64, alpha: f64) -> Result<f64, Degenerate> {
    let k = deviations.len();
    plan_checks(k, n, sd)?;
    let mean = deviations.iter().sum::<f64>() / k as f64;
    let squares: f64 = deviations.iter().map(|d| ((d - mean) / sd).powi(2)).sum();
    f_power(
        (k - 1) as f64,
        (k * (n - 1)) as f64,
        n as f64 * squares,
        alpha,
    )
}

/// Power of Welch's test at level `alpha` for true means, sds and counts in `sources` (`mean`, and
/// `ss` = (n - 1) sd^2).
///
/// Noncentral F with the weights and degrees of freedom of Welch's statistic at the true variances
/// (Jan and Shieh 2014, Br. J. Math. Stat. Psychol. 67, 72–93): an approximation, good to about 0.01.
///
/// # Errors
/// [`Degenerate`] as [`super::welch_from`], and for alpha outside (0, 1).
pub fn welch_power(sources: &[Summary], alpha: f64) -> Result<f64, Degenerate> {
    let df = super::welch_from(sources)?.df;
    let super::Df::Two(df1, df2) = df else {
        return Err(Degenerate::ShapeMismatch);
    };
    let weight = |s: &Summary| s.n as f64 * (s.n - 1) as f64 / s.ss;
    let whole: f64 = sources.iter().map(weight).sum();
    let origin = sources[0].mean;
    let centre = sources
        .iter()
        .map(|s| weight(s) * (s.mean - origin))
        .sum::<f64>()
        / whole;
    let lambda = sources
        .iter()
        .map(|s| weight(s) * (s.mean - origin - centre).powi(2))
        .sum();
    f_power(df1, df2, lambda, alpha)
}

/// Power to name one deviating source among `k` even ones: its t against the mean of the rest at
/// Bonferroni's level `alpha` / k, pooled variance.
///
/// lambda = deviation^2 / (sd^2 (1/n + 1/((k-1) n))) on 1 and k (n-1) degrees of freedom.
///
/// # Errors
/// As [`anova_power`].
pub fn naming_power(
    deviation: f64,
    k: usize,
    n: usize,
    sd: f64,
    alpha: f64,
) -> Result<f64, Degenerate> {
    plan_checks(k, n, sd)?;
    let (sources, size) = (k as f64, n as f64);
    let lambda = (deviation / sd).powi(2) * size * (sources - 1.0) / sources;
    f_power(1.0, sources * (size - 1.0), lambda, alpha / sources)
}

/// Values per source for a power: the smallest n from 2 to `most` at which `power` reaches `goal`.
///
/// `power` maps n to a power and must not fall with n. None when even `most` is too few.
///
/// # Errors
/// Whatever `power` answers.
pub fn smallest_n(
    goal: f64,
    most: usize,
    power: impl Fn(usize) -> Result<f64, Degenerate>,
) -> Result<Option<usize>, Degenerate> {
    if most < 2 || power(most)? < goal {
        return Ok(None);
    }
    let (mut below, mut enough) = (1, most);
    while enough - below > 1 {
        let middle = below + (enough - below) / 2;
        if power(middle)? >= goal {
            enough = middle;
        } else {
            below = middle;
        }
    }
    Ok(Some(enough))
}

/// The smallest deviation, in sds, that is found with probability `goal`: where `power` reaches it.
///
/// `power` maps a deviation in sds to a power, rising with it. None when 100 sds are not enough.
/// Relative accuracy 1e-9.
///
/// # Errors
/// Whatever `power` answers.
pub fn smallest_deviation(
    goal: f64,
    power: impl Fn(f64) -> Result<f64, Degenerate>,
) -> Result<Option<f64>, Degenerate> {
    let (mut low, mut high) = (0.0, 1.0);
    while power(high)? < goal {
        low = high;
        high *= 2.0;
        if high > 100.0 {
            return Ok(None);
        }
    }
    while high - low > 1e-10 * high {
        let middle = 0.5 * (low + high);
        if power(middle)? < goal {
            low = middle;
        } else {
            high = middle;
        }
    }
    Ok(Some(0.5 * (low + high)))
}

fn f_power(df1: f64, df2: f64, lambda: f64, alpha: f64) -> Result<f64, Degenerate> {
    if !(alpha > 0.0 && alpha < 1.0) {
        return Err(Degenerate::NotAProbability);
    }
    if !lambda.is_finite() {
        return Err(Degenerate::NotFinite);
    }
    let critical = f::isf(alpha, df1, df2)?;
    Ok(noncentral_f::sf(critical, df1, df2, lambda)?)
}

fn plan_checks(k: usize, n: usize, sd: f64) -> Result<(), Degenerate> {
    if k < 2 {
        Err(Degenerate::FewerThanTwoSources)
    } else if n < 2 {
        Err(Degenerate::TooFewValues {
            source: 0,
            needed: 2,
        })
    } else if !sd.is_finite() {
        Err(Degenerate::NotFinite)
    } else if sd <= 0.0 {
        Err(Degenerate::ZeroSpread { source: 0 })
    } else {
        Ok(())
    }
}
