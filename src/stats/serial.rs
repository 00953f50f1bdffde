//! Do successive values of a source depend on each other?

use super::Degenerate;
use super::summary::{check_finite, summarize};

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
        let origin = values[0];
        let centred: Vec<f64> = values.iter().map(|v| v - origin).collect();
        let mean = summarize(&centred).mean;
        squares += centred.iter().map(|v| (v - mean).powi(2)).sum::<f64>();
        products += centred
            .windows(2)
            .map(|w| (w[0] - mean) * (w[1] - mean))
            .sum::<f64>();
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
