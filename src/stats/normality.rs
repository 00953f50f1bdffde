//! Are values normal? Shapiro–Wilk and Anderson–Darling.

use super::dist::normal;
use super::summary::{check_finite, spread_in_range, summarize_about};
use super::{Degenerate, Df, Test};

/// Shapiro and Wilk's W by Royston's (1995) approximation, Applied Statistics 44, 547–551 (AS R94).
///
/// 3 to 5000 values. `statistic` is W; small W is evidence against normality, and p is P(W at most
/// this). For n = 3 exact. For up to 11 values p falls to 0 where Royston's transformation ends. The
/// approximation itself is good to about two digits of p; ours agrees with R's to 1e-9.
///
/// # Errors
/// [`Degenerate`] for fewer than 3 or more than 5000 values, NaN or infinite ones, all equal.
pub fn shapiro_wilk(values: &[f64]) -> Result<Test, Degenerate> {
    let n = values.len();
    if n > 5000 {
        return Err(Degenerate::TooManyValues { most: 5000 });
    }
    let (sorted, mean, ss) = standard(values, 3)?;
    let weights = royston_weights(n);
    let half = n / 2;
    let sum: f64 = (0..half)
        .map(|i| weights[i] * (sorted[n - 1 - i] - sorted[i]))
        .sum();
    // 1 - W from the residuals of the fitted line: W near 1 keeps its digits.
    let norm = 2.0 * weights.iter().map(|a| a * a).sum::<f64>();
    let slope = sum / norm;
    let residual: f64 = (0..n)
        .map(|i| {
            let weight = match i {
                i if i < half => -weights[i],
                i if i >= n - half => weights[n - 1 - i],
                _ => 0.0,
            };
            (sorted[i] - mean - slope * weight).powi(2)
        })
        .sum();
    let one_less = (residual / ss).clamp(0.0, 1.0);
    Ok(Test {
        statistic: 1.0 - one_less,
        df: Df::None,
        p: royston_p(one_less, n),
    })
}

/// The weights of the lower half of the order statistics, positive.
fn royston_weights(n: usize) -> Vec<f64> {
    let half = n / 2;
    if n == 3 {
        return vec![0.5_f64.sqrt()];
    }
    let size = n as f64;
    let score = |i: usize| {
        let p = (i as f64 + 1.0 - 0.375) / (size + 0.25);
        // p lies below one half by construction.
        normal::isf(p).unwrap_or(0.0)
    };
    let m: Vec<f64> = (0..half).map(score).collect();
    let sum: f64 = 2.0 * m.iter().map(|m| m * m).sum::<f64>();
    let root = 1.0 / size.sqrt();
    let last = polynomial(
        &[0.0, 0.221157, -0.147981, -2.071190, 4.434685, -2.706056],
        root,
    ) + m[0] / sum.sqrt();
    let before = polynomial(
        &[0.0, 0.042981, -0.293762, -1.752461, 5.682633, -3.582633],
        root,
    ) + m.get(1).map_or(0.0, |m| m / sum.sqrt());
    let (given, rest, left) = if n > 5 {
        let rest = sum - 2.0 * m[0] * m[0] - 2.0 * m[1] * m[1];
        (
            vec![last, before],
            rest,
            1.0 - 2.0 * last * last - 2.0 * before * before,
        )
    } else {
        (vec![last], sum - 2.0 * m[0] * m[0], 1.0 - 2.0 * last * last)
    };
    let scale = (left / rest).sqrt();
    let tail: Vec<f64> = m[given.len()..].iter().map(|m| m * scale).collect();
    [given, tail].concat()
}

fn royston_p(one_less: f64, n: usize) -> f64 {
    let size = n as f64;
    if n == 3 {
        let w = (1.0 - one_less).sqrt().asin();
        return (6.0 / std::f64::consts::PI * (w - std::f64::consts::FRAC_PI_3)).clamp(0.0, 1.0);
    }
    let y = one_less.ln();
    let (y, mean, ln_sd) = if n <= 11 {
        let end = polynomial(&[-2.273, 0.459], size);
        if y >= end {
            return 0.0;
        }
        (
            -(end - y).ln(),
            polynomial(&[0.5440, -0.39978, 0.025054, -0.0006714], size),
            polynomial(&[1.3822, -0.77857, 0.062767, -0.0020322], size),
        )
    } else {
        let ln_n = size.ln();
        (
            y,
            polynomial(&[-1.5861, -0.31082, -0.083751, 0.0038915], ln_n),
            polynomial(&[-0.4803, -0.082676, 0.0030302], ln_n),
        )
    };
    normal::sf((y - mean) / ln_sd.exp())
}

/// Anderson and Darling's A² for normality with estimated mean and sd.
///
/// D'Agostino and Stephens (1986), Goodness-of-Fit Techniques, section 4.8.5: A²(1 + 0.75/n + 2.25/n²)
/// and the fitted p of table 4.9, good to about two digits. `statistic` is A² unmodified. Beyond a
/// modified A² of 10, where the fit ends, p is that at 10 (3.7e-24), an upper bound.
///
/// # Errors
/// [`Degenerate`] for fewer than 8 values, NaN or infinite ones, all equal.
pub fn anderson_darling(values: &[f64]) -> Result<Test, Degenerate> {
    let n = values.len();
    let (sorted, mean, ss) = standard(values, 8)?;
    let size = n as f64;
    let sd = (ss / (size - 1.0)).sqrt();
    let score = |i: usize| (sorted[i] - mean) / sd;
    let sum: f64 = (0..n)
        .map(|i| {
            let weight = (2 * i + 1) as f64;
            weight * (normal::cdf(score(i)).ln() + normal::sf(score(n - 1 - i)).ln())
        })
        .sum();
    let statistic = -size - sum / size;
    let modified = (statistic * (1.0 + 0.75 / size + 2.25 / (size * size))).min(10.0);
    let p = match modified {
        a if a < 0.2 => -polynomial(&[-13.436, 101.14, -223.73], a).exp_m1(),
        a if a < 0.34 => -polynomial(&[-8.318, 42.796, -59.938], a).exp_m1(),
        a if a < 0.6 => polynomial(&[0.9177, -4.279, -1.38], a).exp(),
        a => polynomial(&[1.2937, -5.709, 0.0186], a).exp(),
    };
    Ok(Test {
        statistic,
        df: Df::None,
        p,
    })
}

/// Sorted values about the first one, their mean and centred sum of squares.
fn standard(values: &[f64], needed: usize) -> Result<(Vec<f64>, f64, f64), Degenerate> {
    if values.len() < needed {
        return Err(Degenerate::TooFewValues { source: 0, needed });
    }
    check_finite(&[values])?;
    let origin = values[0];
    let mut sorted: Vec<f64> = values.iter().map(|v| v - origin).collect();
    sorted.sort_unstable_by(f64::total_cmp);
    spread_in_range(sorted[0], sorted[sorted.len() - 1])?;
    let summary = summarize_about(&sorted, 0.0);
    if summary.ss == 0.0 {
        return Err(Degenerate::AllEqual);
    }
    Ok((sorted, summary.mean, summary.ss))
}

fn polynomial(coefficients: &[f64], x: f64) -> f64 {
    coefficients.iter().rev().fold(0.0, |sum, c| sum * x + c)
}
