//! Do successive values of a source depend on each other?

use super::dist::{chi_square, normal};
use super::summary::{check_finite, spread_in_range, summarize};
use super::{Degenerate, Df, Test};

/// Lag-one correlation pooled over sources.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct LagOne {
    /// The pooled correlation of neighbours, between -1 and 1.
    pub phi: f64,
    /// Its standard error, sqrt((1 - phi^2) / pairs) (Bartlett 1946).
    pub std_error: f64,
    /// Number of neighbouring pairs it rests on.
    pub n: usize,
    /// Mean length of the series.
    pub mean_length: f64,
}

impl LagOne {
    /// `phi` with its bias put back to first order: E phi = rho - (1 + 3 rho) / n for a series of n
    /// values about its own mean (Kendall 1954, Biometrika 41, 403–404). Kept within -1 and 1.
    pub fn bias_corrected(&self) -> f64 {
        let n = self.mean_length;
        if n <= 4.0 {
            return self.phi;
        }
        ((n * self.phi + 1.0) / (n - 3.0)).clamp(-1.0, 1.0)
    }
}

/// Lag-one correlation of several series, each about its own mean, pooled: sum of d_t d_(t+1) over
/// sum of d_t^2 (Box and Jenkins 1976, section 2.1.5).
///
/// # Errors
/// [`Degenerate`] for no series, fewer than three values in one, NaN or infinite values, and no
/// spread in any series.
pub fn lag_one(series: &[&[f64]]) -> Result<LagOne, Degenerate> {
    if series.is_empty() {
        return Err(Degenerate::TooFewSources { needed: 1 });
    }
    if let Some(source) = series.iter().position(|s| s.len() < 3) {
        return Err(Degenerate::TooFewValues { source, needed: 3 });
    }
    check_finite(series)?;
    let (mut products, mut squares) = (0.0, 0.0);
    for values in series {
        let centred = match centre(values) {
            Ok(centred) => centred,
            // A series that stands still says nothing about neighbours.
            Err(Degenerate::AllEqual) => continue,
            Err(why) => return Err(why),
        };
        squares += centred.iter().map(|d| d * d).sum::<f64>();
        products += centred.windows(2).map(|w| w[0] * w[1]).sum::<f64>();
    }
    if squares == 0.0 {
        return Err(Degenerate::AllEqual);
    }
    let values: usize = series.iter().map(|s| s.len()).sum();
    let n = values - series.len();
    let phi = products / squares;
    Ok(LagOne {
        phi,
        std_error: ((1.0 - phi * phi).max(0.0) / n as f64).sqrt(),
        n,
        mean_length: values as f64 / series.len() as f64,
    })
}

/// Ljung and Box (1978), Biometrika 65, 297–303: Q = n (n+2) sum r_j^2 / (n-j), chi-square with `lags` df.
///
/// # Errors
/// [`Degenerate`] for no lags, fewer than `lags` + 2 values, NaN or infinite ones, all equal.
pub fn ljung_box(values: &[f64], lags: usize) -> Result<Test, Degenerate> {
    let needed = lags + 2;
    if lags == 0 || values.len() < needed {
        return Err(Degenerate::TooFewValues { source: 0, needed });
    }
    let centred = centre(values)?;
    let squares: f64 = centred.iter().map(|d| d * d).sum();
    let n = values.len() as f64;
    let correlation = |lag: usize| {
        let products = centred.iter().zip(&centred[lag..]).map(|(a, b)| a * b);
        products.sum::<f64>() / squares
    };
    let sum: f64 = (1..=lags)
        .map(|j| correlation(j).powi(2) / (n - j as f64))
        .sum();
    let (statistic, df) = (n * (n + 2.0) * sum, lags as f64);
    Ok(Test {
        statistic,
        df: Df::One(df),
        p: chi_square::sf(statistic, df)?,
    })
}

/// Von Neumann's ratio (1941): sum of squared successive differences over the centred sum of squares.
///
/// Near 2 for independent values, lower when neighbours are alike. p is the upper tail of
/// (1 - ratio/2) / sqrt((n-2)/(n^2-1)) as a normal (Young 1941, Ann. Math. Statist. 12, 293–300): small
/// when neighbours are alike.
///
/// # Errors
/// [`Degenerate`] for fewer than 4 values, NaN or infinite ones, all equal.
pub fn von_neumann_ratio(values: &[f64]) -> Result<Test, Degenerate> {
    if values.len() < 4 {
        return Err(Degenerate::TooFewValues {
            source: 0,
            needed: 4,
        });
    }
    let centred = centre(values)?;
    let squares: f64 = centred.iter().map(|d| d * d).sum();
    let steps: f64 = centred.windows(2).map(|w| (w[1] - w[0]).powi(2)).sum();
    let n = values.len() as f64;
    let statistic = steps / squares;
    let z = (1.0 - 0.5 * statistic) / ((n - 2.0) / (n * n - 1.0)).sqrt();
    Ok(Test {
        statistic,
        df: Df::None,
        p: normal::sf(z),
    })
}

/// How many independent values `n` values with lag-one correlation `phi` are worth for their mean:
/// n (1 - phi)/(1 + phi) for phi above 0, else n (Bayley and Hammersley 1946, first-order form).
///
/// At least 1 for any n of at least 1; `phi` at or above 1 gives 1. NaN gives NaN.
pub fn effective_sample_size(n: usize, phi: f64) -> f64 {
    let n = n as f64;
    if phi.is_nan() {
        return phi;
    }
    if phi <= 0.0 {
        return n;
    }
    (n * (1.0 - phi.min(1.0)) / (1.0 + phi)).max(n.min(1.0))
}

/// Deviations from the mean, taken about the first value.
fn centre(values: &[f64]) -> Result<Vec<f64>, Degenerate> {
    check_finite(&[values])?;
    let low = values.iter().copied().fold(f64::INFINITY, f64::min);
    let high = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    spread_in_range(low, high)?;
    let mut centred: Vec<f64> = values.iter().map(|v| v - values[0]).collect();
    let mean = summarize(&centred).mean;
    for d in &mut centred {
        *d -= mean;
    }
    Ok(centred)
}
