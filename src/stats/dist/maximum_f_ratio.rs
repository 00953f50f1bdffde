//! The ratio of the largest to the smallest of k independent sample variances (Hartley 1950,
//! Biometrika 37, 308–312), for equal or unequal degrees of freedom.
//!
//! Given that source i has the smallest variance x, the others lie above x, and not all of them
//! below r x:
//!
//! P(ratio > r) = sum_i ∫ f_i(x) {prod_(j≠i) S_j(x) - prod_(j≠i) [S_j(x) - S_j(r x)]} dx,
//!
//! S the upper tails of the variances. The brace is prod S · (-expm1(sum log1p(-S(rx)/S(x)))), so the
//! upper tail is computed as such. Trapezoid rule in ln x, on which the integrand is entire.

use super::kernel::gamma_tails;
use super::{OutOfReach, chi_square, degrees, root};

/// Sources that share their degrees of freedom.
struct Class {
    df: f64,
    count: f64,
}

/// Upper tail of the largest over the smallest variance of sources with the given degrees of freedom.
///
/// Relative error at most 1e-12 down to 1e-100 (k = 2 against the F distribution, k to 60 against
/// 50-digit quadrature). A ratio at or below 1 gives 1.
///
/// # Errors
/// [`OutOfReach`] for NaN, fewer than two sources, and df that is below 1 or not finite.
pub fn sf(ratio: f64, dfs: &[f64]) -> Result<f64, OutOfReach> {
    if ratio.is_nan() {
        return Err(OutOfReach::NotANumber);
    }
    let classes = classes(dfs)?;
    if ratio <= 1.0 {
        return Ok(1.0);
    }
    if ratio == f64::INFINITY {
        return Ok(0.0);
    }
    // Above this the smallest variance lies with a probability below rounding.
    let mut highest = f64::INFINITY;
    for class in &classes {
        highest = highest.min(chi_square::isf(1e-19, class.df)? / class.df);
    }
    let largest_df = classes.iter().fold(1.0, |d: f64, c| d.max(c.df));
    let step = (0.12 * (2.0 / largest_df).sqrt()).min(0.1);
    let mut ln_x = highest.ln();
    let (mut sum, mut largest) = (0.0, 0.0_f64);
    for _ in 0..200_000 {
        let term = integrand(&classes, ln_x.exp(), ratio)?;
        sum += term;
        largest = largest.max(term);
        // Left of 1/ratio terms fall like a power of x.
        if ln_x < -ratio.ln() && term < largest * 1e-17 {
            return Ok((sum * step).min(1.0));
        }
        ln_x -= step;
    }
    Err(OutOfReach::NotSettled("the maximum F ratio"))
}

/// Lower tail P(ratio <= r) = 1 - [`sf`], with an absolute error of at most 1e-13.
///
/// # Errors
/// As [`sf`].
pub fn cdf(ratio: f64, dfs: &[f64]) -> Result<f64, OutOfReach> {
    Ok(1.0 - sf(ratio, dfs)?)
}

/// The ratio whose upper tail is `p`.
///
/// # Errors
/// [`OutOfReach`] unless 0 < p < 1, and as [`sf`].
pub fn isf(p: f64, dfs: &[f64]) -> Result<f64, OutOfReach> {
    let p = super::probability(p)?;
    let least = dfs.iter().copied().fold(f64::INFINITY, f64::min);
    let pairs = 0.5 * (dfs.len() * dfs.len().saturating_sub(1)) as f64;
    classes(dfs)?;
    // Bonferroni over all pairs, each with the smallest df.
    let high = super::f::isf(0.5 * p / pairs.max(1.0), least, least)? * (1.0 + 1e-9);
    let ln_ratio = root::upper_quantile(p, 1e-12, high.ln(), |ln| sf(ln.exp(), dfs))?;
    Ok(ln_ratio.exp())
}

fn classes(dfs: &[f64]) -> Result<Vec<Class>, OutOfReach> {
    if dfs.len() < 2 {
        return Err(OutOfReach::Argument(
            "a ratio of variances needs two sources",
        ));
    }
    let mut sorted = dfs.to_vec();
    sorted.sort_unstable_by(f64::total_cmp);
    let mut classes: Vec<Class> = Vec::new();
    for df in sorted {
        if degrees(df)? < 1.0 || df == f64::INFINITY {
            return Err(OutOfReach::Argument(
                "a sample variance has 1 degree of freedom or more",
            ));
        }
        match classes.last_mut() {
            Some(last) if last.df == df => last.count += 1.0,
            _ => classes.push(Class { df, count: 1.0 }),
        }
    }
    Ok(classes)
}

/// x times the density of the smallest variance, times P(largest above ratio x | smallest x).
fn integrand(classes: &[Class], x: f64, ratio: f64) -> Result<f64, OutOfReach> {
    let mut parts = Vec::with_capacity(classes.len());
    let (mut ln_all_above, mut ln_all_between) = (0.0, 0.0);
    for class in classes {
        let (a, scaled) = (0.5 * class.df, 0.5 * class.df * x);
        let at = gamma_tails(a, scaled)?;
        let beyond = gamma_tails(a, scaled * ratio)?.upper;
        // ln(1 - S(rx)/S(x)), from the mass between where the ratio is near 1.
        let share = beyond / at.upper;
        let ln_between = if share < 0.5 {
            (-share).ln_1p()
        } else {
            ((at.upper - beyond) / at.upper).ln()
        };
        let ln_above = if at.lower < 0.5 {
            (-at.lower).ln_1p()
        } else {
            at.upper.ln()
        };
        ln_all_above += class.count * ln_above;
        ln_all_between += class.count * ln_between;
        parts.push((class.count * at.x_density / at.upper, ln_between));
    }
    let above = ln_all_above.exp();
    Ok(parts
        .iter()
        .map(|(hazard, ln_between)| {
            // 0 · infinity where nothing lies between: the brace is then 1.
            let rest = ln_all_between - ln_between;
            let brace = if rest.is_nan() { 1.0 } else { -rest.exp_m1() };
            hazard * above * brace
        })
        .sum())
}
