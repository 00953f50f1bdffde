//! Level tests by ranks: Kruskal–Wallis for unpaired sources, Friedman for blocks.

use super::dist::chi_square;
use super::order::midranks;
use super::summary::check;
use super::{Blocks, Degenerate, Df, Test};

/// Kruskal and Wallis (1952): H corrected for ties, chi-square with k - 1 df.
///
/// H = (N - 1) · sum n_i (r_i - (N+1)/2)^2 / sum over all values of (rank - (N+1)/2)^2, which is
/// the tie-corrected form. The chi-square tail is the method's own approximation.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, an empty one, NaN or infinite values, all equal.
pub fn kruskal_wallis(groups: &[&[f64]]) -> Result<Test, Degenerate> {
    check(groups, 1)?;
    let pooled = groups.concat();
    let (ranks, ties) = midranks(&pooled);
    let n = pooled.len() as f64;
    let middle = 0.5 * (n + 1.0);
    let mut from = 0;
    let mut between = 0.0;
    for group in groups {
        let own = &ranks[from..from + group.len()];
        from += group.len();
        let sum: f64 = own.iter().map(|r| r - middle).sum();
        between += sum * sum / group.len() as f64;
    }
    let all = (n * n * n - n - ties) / 12.0;
    chi_square_test((n - 1.0) * between / all, groups.len() as f64 - 1.0)
}

/// Friedman (1937) for complete blocks, corrected for ties; chi-square with k - 1 df.
///
/// Ranks are taken within each block. Blocks with a missing cell are left out.
///
/// # Errors
/// [`Degenerate`] for fewer than two sources, fewer than two complete blocks, infinite values, and all values equal
/// within every block.
pub fn friedman(blocks: &Blocks) -> Result<Test, Degenerate> {
    let k = blocks.sources();
    if k < 2 {
        return Err(Degenerate::FewerThanTwoSources);
    }
    if blocks.rows().flatten().any(|v| v.is_infinite()) {
        return Err(Degenerate::NotFinite);
    }
    let middle = 0.5 * (k as f64 + 1.0);
    let mut sums = vec![0.0; k];
    let (mut used, mut spread) = (0, 0.0);
    let cubed = (k * k * k - k) as f64;
    for row in blocks.rows().filter(|row| row.iter().all(|v| !v.is_nan())) {
        let (ranks, ties) = midranks(row);
        used += 1;
        spread += (cubed - ties) / 12.0;
        for (sum, rank) in sums.iter_mut().zip(&ranks) {
            *sum += rank - middle;
        }
    }
    if used < 2 {
        return Err(Degenerate::TooFewValues {
            source: 0,
            needed: 2,
        });
    }
    if spread == 0.0 {
        return Err(Degenerate::AllEqual);
    }
    let between: f64 = sums.iter().map(|s| s * s).sum();
    chi_square_test((k as f64 - 1.0) * between / spread, k as f64 - 1.0)
}

fn chi_square_test(statistic: f64, df: f64) -> Result<Test, Degenerate> {
    Ok(Test {
        statistic,
        df: Df::One(df),
        p: chi_square::sf(statistic, df)?,
    })
}
