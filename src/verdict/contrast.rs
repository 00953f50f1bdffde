//! A planned contrast fitted to the means of sources.

use crate::stats::dist;

use super::errors::Errors;

/// A contrast of one or two columns over the sources.
pub struct Contrast {
    /// Each centred over the sources.
    columns: Vec<Vec<f64>>,
}

/// What came of fitting a contrast.
pub struct Fit {
    /// One coefficient for each column, in the unit.
    pub coefficients: Vec<f64>,
    /// Their covariance, row by row.
    pub covariance: Vec<f64>,
    /// Degrees of freedom of the errors.
    pub df: f64,
    /// Probability of a range of fitted values as far beyond the margin by chance.
    pub p: f64,
    /// The sources' means less the fit and less their common mean.
    pub remainder: Vec<f64>,
}

impl Contrast {
    /// From one or two columns, a cell for each source.
    pub fn new(mut columns: Vec<Vec<f64>>) -> Self {
        for column in &mut columns {
            let mean = column.iter().sum::<f64>() / column.len().max(1) as f64;
            column.iter_mut().for_each(|c| *c -= mean);
        }
        Self { columns }
    }

    /// Those inside from those outside; the coefficient is the difference of their means.
    pub fn split(inside: &[bool]) -> Self {
        Self::new(vec![
            inside.iter().map(|i| f64::from(u8::from(*i))).collect(),
        ])
    }

    /// Least squares with equal weights; the test is Wald's F with the errors' own covariances, the fit
    /// first shortened so that its range loses the margin. `None` where the columns say the same.
    pub fn fit(&self, means: &[f64], errors: &Errors, margin: f64) -> Option<Fit> {
        let weights = self.weights()?;
        let coefficients: Vec<f64> = weights.iter().map(|w| dot(w, means)).collect();
        let pairs = weights
            .iter()
            .flat_map(|a| weights.iter().map(move |b| (a, b)));
        let covariance: Vec<f64> = pairs.map(|(a, b)| errors.of_contrasts(a, b)).collect();
        let centre = means.iter().sum::<f64>() / means.len() as f64;
        let fitted = |c: usize| -> f64 {
            let columns = self.columns.iter().zip(&coefficients);
            columns.map(|(column, b)| column[c] * b).sum()
        };
        let fitted: Vec<f64> = (0..means.len()).map(fitted).collect();
        let range = fitted.iter().copied().fold(f64::NEG_INFINITY, f64::max)
            - fitted.iter().copied().fold(f64::INFINITY, f64::min);
        let beyond = ((range - margin) / range).max(0.0);
        let q = coefficients.len() as f64;
        let df = errors.df().max(1.0);
        let f = beyond * beyond * quadratic(&coefficients, &covariance)? / q;
        let remainder = means.iter().zip(&fitted).map(|(m, f)| m - centre - f);
        Some(Fit {
            p: dist::f::sf(f, q, df).ok()?,
            remainder: remainder.collect(),
            coefficients,
            covariance,
            df,
        })
    }

    /// The weights over the means that give each coefficient: the columns over their cross products.
    fn weights(&self) -> Option<Vec<Vec<f64>>> {
        match self.columns.as_slice() {
            [one] => {
                let own = dot(one, one);
                (own > 0.0).then(|| vec![one.iter().map(|c| c / own).collect()])
            }
            [a, b] => {
                let (aa, ab, bb) = (dot(a, a), dot(a, b), dot(b, b));
                let size = aa * bb - ab * ab;
                let of = |x: f64, y: f64| {
                    let cells = a.iter().zip(b);
                    cells.map(|(a, b)| (x * a + y * b) / size).collect()
                };
                (size > 1e-9 * aa * bb).then(|| vec![of(bb, -ab), of(-ab, aa)])
            }
            _ => None,
        }
    }
}

fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}

/// b' V^-1 b for one or two coefficients.
fn quadratic(b: &[f64], v: &[f64]) -> Option<f64> {
    let value = match (b, v) {
        ([b], [v]) => b * b / v,
        ([x, y], [xx, xy, _, yy]) => {
            let size = xx * yy - xy * xy;
            (x * x * yy - 2.0 * x * y * xy + y * y * xx) / size
        }
        _ => return None,
    };
    (value.is_finite() && value >= 0.0).then_some(value)
}
