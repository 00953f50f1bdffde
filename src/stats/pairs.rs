//! Which sources differ? All pairs by the studentized range: Tukey–Kramer and Games–Howell.

use super::dist::studentized_range::{self, RangeTable};
use super::level::{counts, no_spread};
use super::summary::checked_summaries;
use super::{Degenerate, Summary};
use std::f64::consts::SQRT_2;

/// One pair of sources with its simultaneous p-value.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Pair {
    /// Index of the first source.
    pub a: usize,
    /// Index of the second source, above `a`.
    pub b: usize,
    /// Mean of `a` less mean of `b`, in the unit.
    pub difference: f64,
    /// Standard error of the difference, in the unit.
    pub std_error: f64,
    /// Degrees of freedom of the standard error.
    pub df: f64,
    /// P(some pair at least this far apart) when all sources are alike.
    pub p_adjusted: f64,
}

impl Pair {
    /// Simultaneous interval of the difference over all pairs of `k` sources, at level 1 - `alpha`.
    ///
    /// difference ± q(alpha; k, df) / sqrt(2) · std_error, q of the studentized range.
    ///
    /// # Errors
    /// [`Degenerate::Distribution`] unless 0 < alpha < 1 and the distribution reaches k and df.
    pub fn interval(&self, k: usize, alpha: f64) -> Result<(f64, f64), Degenerate> {
        let q = studentized_range::isf(alpha, k, self.df.max(1.0))?;
        let half = q / SQRT_2 * self.std_error;
        Ok((self.difference - half, self.difference + half))
    }
}

/// Tukey (1953) with Kramer's (1956) form for unequal counts: pooled variance, all pairs.
///
/// q = sqrt(2) |difference| / std_error with k means and N - k degrees of freedom; exact for equal
/// counts, conservative otherwise (Hayter 1984). p within 1e-12.
///
/// # Errors
/// [`Degenerate`] as [`super::anova`], and for more sources than the studentized range reaches.
pub fn tukey_kramer(groups: &[&[f64]]) -> Result<Vec<Pair>, Degenerate> {
    tukey_kramer_from(&checked_summaries(groups, 1)?)
}

/// [`tukey_kramer`] from summaries (variances possibly inflated by the caller).
///
/// # Errors
/// As [`tukey_kramer`].
pub fn tukey_kramer_from(summaries: &[Summary]) -> Result<Vec<Pair>, Degenerate> {
    let (k, total) = counts(summaries, 1)?;
    if total == k {
        return Err(Degenerate::TooFewValues {
            source: 0,
            needed: 2,
        });
    }
    let df = (total - k) as f64;
    let pooled = summaries.iter().map(|s| s.ss).sum::<f64>() / df;
    if pooled == 0.0 {
        return Err(no_spread(summaries));
    }
    all_pairs(summaries, |a, b| {
        (pooled * (1.0 / a.n as f64 + 1.0 / b.n as f64), df)
    })
}

/// Games and Howell (1976): each pair with its own variances and Welch's degrees of freedom.
///
/// J. Educ. Stat. 1, 113–125. se^2 = s_a^2/n_a + s_b^2/n_b, df after Welch and Satterthwaite, q =
/// sqrt(2) |difference| / se against the studentized range of k means. p within 1e-12. A pair of
/// two sources without spread has no answer.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, fewer than two values in one, NaN or infinite values,
/// all equal, and two sources without spread.
pub fn games_howell(groups: &[&[f64]]) -> Result<Vec<Pair>, Degenerate> {
    games_howell_from(&checked_summaries(groups, 2)?)
}

/// [`games_howell`] from summaries (variances possibly inflated by the caller).
///
/// # Errors
/// As [`games_howell`].
pub fn games_howell_from(summaries: &[Summary]) -> Result<Vec<Pair>, Degenerate> {
    counts(summaries, 2)?;
    let mut still = summaries
        .iter()
        .enumerate()
        .filter(|(_, s)| s.ss == 0.0)
        .map(|(i, _)| i);
    if let (Some(source), Some(_)) = (still.next(), still.next()) {
        return Err(if summaries.iter().all(|s| s.ss == 0.0) {
            no_spread(summaries)
        } else {
            Degenerate::ZeroSpread { source }
        });
    }
    all_pairs(summaries, welch_error)
}

/// Squared standard error of a difference of means and its Welch–Satterthwaite df.
pub(super) fn welch_error(a: &Summary, b: &Summary) -> (f64, f64) {
    let part = |s: &Summary| s.ss / (s.n as f64 * (s.n - 1) as f64);
    let (va, vb) = (part(a), part(b));
    let share = va / (va + vb);
    let rest = vb / (va + vb);
    let df = 1.0 / (share * share / (a.n - 1) as f64 + rest * rest / (b.n - 1) as f64);
    (va + vb, df)
}

fn all_pairs(
    summaries: &[Summary],
    error: impl Fn(&Summary, &Summary) -> (f64, f64),
) -> Result<Vec<Pair>, Degenerate> {
    let k = summaries.len();
    let table = studentized_range::table(k)?;
    let mut pairs = Vec::with_capacity(k * (k - 1) / 2);
    for a in 0..k {
        for b in a + 1..k {
            let (variance, df) = error(&summaries[a], &summaries[b]);
            let difference = summaries[a].mean - summaries[b].mean;
            pairs.push(studentized_pair(
                &table,
                (a, b),
                difference,
                variance.sqrt(),
                df,
            )?);
        }
    }
    Ok(pairs)
}

/// A pair whose p-value comes from the studentized range.
pub(super) fn studentized_pair(
    table: &RangeTable,
    (a, b): (usize, usize),
    difference: f64,
    std_error: f64,
    df: f64,
) -> Result<Pair, Degenerate> {
    let q = SQRT_2 * difference.abs() / std_error;
    // Welch's df is at least 1; rounding may leave a hair less.
    let p_adjusted = table.sf(q, df.max(1.0))?;
    Ok(Pair {
        a,
        b,
        difference,
        std_error,
        df,
        p_adjusted,
    })
}
