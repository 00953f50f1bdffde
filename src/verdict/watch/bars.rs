//! The thresholds in use, and when they are worked out anew: when who is compared or the terms change,
//! and when what was learnt changed enough to matter. Working them out takes milliseconds, a cycle
//! microseconds.

use serde::{Deserialize, Serialize};

use super::Terms;
use super::learning::KNOWN_DF;
use super::scale::Scale;
use super::scatter::seen_ratio;
use super::shape::Shape;
use super::thresholds::{Basis, Thresholds, score_phi, thresholds};

/// A margin in sds that moved by less than this share moves thresholds by less than a hundredth.
const MARGIN_MOVED: f64 = 0.02;
/// A correlation that moved by less than this moves the mean cycles to a false call by less than 10 %.
const PHI_MOVED: f64 = 0.005;
/// The t correction follows when the degrees of freedom have grown by this.
const DF_GREW: f64 = 1.25;

/// Clipping, and paying for dependence and degrees of freedom that are not surely known, keep some calls
/// back that thresholds for known sigma and normal values count: even banks of 3, 4, 12, 60 sources
/// realise 1.31, 1.30, 1.18, 1.08 times the 10 000 cycles asked for (simulated, errors 0.07 to 0.1; a fifth
/// of the budget is for spread at its margin, which even sources do not use), at 100 000 less.
/// Thresholds are asked for this much less.
const KEPT_BACK: f64 = 0.85;
/// Two sources have no spread parts whose share they could leave to others: 1.24 with this.
const KEPT_BACK_BY_TWO: f64 = 0.8;

/// By how much the variance of a sum of scores is larger than of independent ones: successive deviations
/// share eight or nine of their ten earlier values (1 + 2 sum of the squares of the deviations'
/// autocorrelations -j/110, j = 1 to 10, to first order).
const SCORE_FACTOR: f64 = 1.064;

/// Thresholds and what they rest on.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Bars {
    /// What they rest on.
    pub basis: Basis,
    /// The thresholds.
    pub thresholds: Thresholds,
    /// What the spread margin comes to between deviations of residuals, above and (as a ratio above 1)
    /// below.
    pub ratios: (f64, f64),
}

/// The ratios of [`Bars::ratios`]. Where the mean of a cycle is weighted by the sources' own variances,
/// residuals show the ratio as it is.
fn ratios(terms: &Terms, scale: &Scale, sources: usize) -> (f64, f64) {
    let ratio = terms.spread_margin.max(1.0);
    if !scale.own.is_empty() {
        return (ratio, ratio);
    }
    (
        seen_ratio(ratio, sources),
        1.0 / seen_ratio(1.0 / ratio, sources),
    )
}

impl Bars {
    /// The basis for `sources` under the terms, with what was learnt.
    pub fn basis(terms: &Terms, scale: &Scale, sources: usize, df: f64) -> Basis {
        let (above, below) = ratios(terms, scale, sources);
        let kept_back = if sources > 2 {
            KEPT_BACK
        } else {
            KEPT_BACK_BY_TWO
        };
        Basis {
            sources,
            margin_sd: terms.margin / scale.paid_sigma(),
            // The smaller one asks for the higher threshold.
            spread_margin: f64::min(above, below),
            cycles_per_false_call: terms.cycles_per_false_call * kept_back,
            phi: scale.phi,
            df: if df < KNOWN_DF { df } else { f64::INFINITY },
        }
    }

    /// The thresholds for a basis.
    pub fn new(basis: Basis, terms: &Terms, scale: &Scale) -> Self {
        Self {
            thresholds: thresholds(&basis),
            ratios: ratios(terms, scale, basis.sources),
            basis,
        }
    }

    /// Whether thresholds for `wanted` would differ from these by something that matters.
    pub fn is_stale(&self, wanted: &Basis) -> bool {
        let held = &self.basis;
        let same_terms = held.sources == wanted.sources
            && held.spread_margin == wanted.spread_margin
            && held.cycles_per_false_call == wanted.cycles_per_false_call
            && (held.margin_sd == 0.0) == (wanted.margin_sd == 0.0);
        let near = |a: f64, b: f64| (a - b).abs() <= MARGIN_MOVED * b.abs();
        let known = held.df == wanted.df || wanted.df < held.df * DF_GREW && wanted.df.is_finite();
        !(same_terms
            && known
            && near(held.margin_sd, wanted.margin_sd)
            && (held.phi - wanted.phi).abs() < PHI_MOVED)
    }

    /// What a deviation adds to the evidence of an erratic and of a quiet source; `seen` is its size in sds
    /// of the others. A source exactly at the margin scores as a standard normal.
    #[inline]
    pub fn scores(&self, shape: &Shape, seen: f64) -> (f64, f64) {
        let (above, below) = self.ratios;
        (shape.score(seen / above), -shape.score(seen * below))
    }

    /// Variance of a score, dependence paid: it has the square of the values' correlation.
    pub fn score_variance(&self) -> f64 {
        let phi = score_phi(self.basis.phi);
        SCORE_FACTOR * (1.0 + phi) / (1.0 - phi)
    }

    /// What the squared evidence of spread is compared with, above and below.
    #[inline]
    pub fn score_bars(&self) -> (Option<f64>, Option<f64>) {
        let bar = |z: Option<f64>| z.map(|z| z * z * self.score_variance());
        (bar(self.thresholds.erratic), bar(self.thresholds.quiet))
    }
}
