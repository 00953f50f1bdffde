//! What was learnt of a bank: sums from which sigma, dependence and the sds of single sources follow.

use serde::{Deserialize, Serialize};

use super::block::{self, CYCLES, Share};
use super::scores::Scores;
use super::shape::Shape;
use crate::stats::dist::chi_square;

/// Older blocks fade so that never more than this counts: sigma to 0.3 %, and wear is followed.
const LONGEST_DF: f64 = 60_000.0;
/// The same for the sd of a single source: to 1 %.
const LONGEST_OWN_DF: f64 = 6_000.0;
/// Until then the upper limit of the correlation is paid.
const SURE_OF_PHI: u32 = 2_000;
/// The upper 80 % limit lies this many standard errors above.
const UPPER_80: f64 = 0.8416;
/// Nothing above is paid for: beyond it there is no information anyway.
const LARGEST_PHI: f64 = 0.98;
/// Cycles after which sources may have sds of their own.
const OWN_AFTER: u32 = 1_000;
/// Degrees of freedom that a source's own sd rests on at least.
const OWN_DF: f64 = 400.0;
/// No source is believed to have a smaller share of the mean variance: it would own the mean.
const SMALLEST_SHARE: f64 = 0.04;
/// Sds differ below this probability of Bartlett's statistic ...
const UNEQUAL_P: f64 = 1e-4;
/// ... which is this much larger for the heaviest tails that clipping leaves (kurtosis up to 5) ...
const NOT_NORMAL: f64 = 2.0;
/// ... and beyond this ratio; below, thresholds hardly feel it.
const UNEQUAL_RATIO: f64 = 1.1;

/// What was learnt of a bank under one product.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Learnt {
    /// Sum of squares about the block means.
    squares: f64,
    /// What it is expected to be for a variance of 1.
    df: f64,
    products: f64,
    /// What squares and products say of the correlation of neighbours.
    phi: f64,
    cycles: u32,
    /// Squares and df of each source.
    own: Vec<(f64, f64)>,
    /// Whether sources are seen to differ, and weigh in the mean accordingly.
    weighted: bool,
    shape: Shape,
    /// Where the noise is not normal, the way to normal scores.
    scores: Option<Scores>,
}

impl Learnt {
    /// Degrees of freedom of the variance.
    pub fn df(&self) -> f64 {
        self.df
    }

    /// Cycles that are contained.
    pub fn cycles(&self) -> u32 {
        self.cycles
    }

    /// Variance of a single value within its source, unit squared; `None` before the first block.
    pub fn variance(&self) -> Option<f64> {
        (self.df > 0.0).then(|| self.squares / self.df / block::squares_kept(self.phi().max(0.0)))
    }

    /// Correlation of neighbours, without bias.
    pub fn phi(&self) -> f64 {
        self.phi
    }

    /// The correlation that is paid for: its upper 80 % limit before 2 000 cycles, later the estimate as far
    /// as it stands out of its error. (Paying for every positive estimate makes independent values of two
    /// sources call a sixth too rarely; simulated.)
    pub fn phi_paid(&self) -> f64 {
        let phi = self.phi().max(0.0);
        let squared_error = (1.0 - phi * phi).max(0.0) / self.df.max(1.0);
        let paid = if self.cycles < SURE_OF_PHI {
            phi + UPPER_80 * squared_error.sqrt()
        } else {
            phi.powi(3) / (phi * phi + squared_error)
        };
        paid.clamp(0.0, LARGEST_PHI)
    }

    /// Variances of the compared sources, in the unit squared, once they are seen to differ; empty before.
    ///
    /// While the mean of a cycle weighs all alike, a residual contains the others' noise, and variances
    /// are recovered as sigma_i^2 = ((k-1) v_i - mean of v)/(k-2), v_i the residual's over (k-1)/k (Grubbs
    /// 1948). From then on the mean is weighted by one over the variances, and squares tell directly.
    pub fn own_variances(&mut self, columns: &[u16]) -> Vec<f64> {
        let k = columns.len() as f64;
        if self.cycles < OWN_AFTER || columns.len() < 3 {
            return Vec::new();
        }
        let pooled = self.plain_variance();
        let known = |s: &u16| self.own.get(usize::from(*s)).filter(|own| own.1 >= OWN_DF);
        let seen: Vec<f64> = columns
            .iter()
            .map(|s| known(s).map_or(pooled, |(squares, df)| squares / df))
            .collect();
        let kept = block::squares_kept(self.phi().max(0.0));
        if self.weighted {
            let floor = SMALLEST_SHARE * pooled;
            return seen.iter().map(|v| v.max(floor) / kept).collect();
        }
        let mean = seen.iter().sum::<f64>() / k;
        let recovered = |v: &f64| (((k - 1.0) * v - mean) / (k - 2.0)).max(SMALLEST_SHARE * mean);
        let own: Vec<f64> = seen.iter().map(recovered).collect();
        if !differ(&own, 0.98 * f64::from(self.cycles)) {
            return Vec::new();
        }
        self.weighted = true;
        for (source, variance) in columns.iter().zip(&own) {
            if let Some((squares, df)) = self.own.get_mut(usize::from(*source)) {
                *squares = variance * *df;
            }
        }
        own.iter().map(|v| v / kept).collect()
    }

    /// The way to normal scores, where the noise is not normal.
    pub fn scores(&self) -> Option<&Scores> {
        self.scores.as_ref()
    }

    /// From now on residuals are scores: `variance` of a single value, on the degrees there are.
    pub fn adopt(&mut self, scores: Scores, variance: f64, shape: Shape) {
        let scale = variance * self.df / self.squares;
        self.squares *= scale;
        self.products *= scale;
        self.own.clear();
        self.scores = Some(scores);
        self.shape = shape;
    }

    /// Variance as it stands, dependence aside.
    pub fn plain_variance(&self) -> f64 {
        self.squares / self.df
    }

    /// Counts the size of a deviation, in sd.
    #[inline]
    pub fn count(&mut self, e: f64) {
        self.shape.count(e);
    }

    /// Brings the scores of deviations up to what was counted.
    pub fn refresh_shape(&mut self) {
        self.shape.refresh();
    }

    /// The sizes of deviations.
    pub fn shape(&self) -> &Shape {
        &self.shape
    }

    /// Takes in a closed block; squares of a source count `relative` of what they are in the pool.
    pub fn take_in(&mut self, block: &[Share], relative: &dyn Fn(usize) -> f64) {
        for share in block {
            let source = usize::from(share.source);
            if self.own.len() <= source {
                self.own.resize(source + 1, (0.0, 0.0));
            }
            let own = &mut self.own[source];
            let (squares, df) = (own.0 + share.squares, own.1 + share.df);
            let kept = (LONGEST_OWN_DF / df).min(1.0);
            *own = (squares * kept, df * kept);
            let scale = relative(source);
            self.squares += share.squares * scale;
            self.products += share.products * scale;
            self.df += share.df;
        }
        self.cycles = self.cycles.saturating_add(CYCLES);
        let kept = (LONGEST_DF / self.df.max(1.0)).min(1.0);
        for sum in [&mut self.squares, &mut self.products, &mut self.df] {
            *sum *= kept;
        }
        if self.squares > 0.0 {
            self.phi = block::correlation(self.products / self.squares);
        }
    }
}

/// Whether variances on `df` degrees each differ more than by chance: Bartlett's statistic (1937).
fn differ(variances: &[f64], df: f64) -> bool {
    let n = variances.len() as f64;
    let mean = variances.iter().sum::<f64>() / n;
    let statistic = df * variances.iter().map(|v| (mean / v).ln()).sum::<f64>();
    let (low, high) = variances.iter().fold((f64::INFINITY, 0.0), |(l, h), v| {
        (f64::min(l, *v), f64::max(h, *v))
    });
    // Without a quantile (no degrees of freedom) nothing differs.
    let bar = chi_square::isf(UNEQUAL_P, n - 1.0).unwrap_or(f64::INFINITY);
    statistic > NOT_NORMAL * bar && high > low * UNEQUAL_RATIO * UNEQUAL_RATIO
}
