//! Windows that overlap: how much of the call budget one evaluation may spend.
//!
//! Windows of n values looked at every L values cross a threshold in clusters, so the plain union bound
//! is 1 to 3.4 times too quiet. With z threshold b the share of evaluations that begin a cluster is
//! g = min(1, x² nu(x)/2), x = b √(2 L/n): the chance that a stationary sequence with that local
//! correlation is above b for the first time (Siegmund 1985; Leadbetter, Lindgren and Rootzén 1983 for
//! clusters). All spans share one alpha: Σ over spans of alpha g K/L = rate.

use super::nu::nu;
use super::pair::range_quantile;
use crate::stats::dist::{chi_square, normal};

/// The watch's window: its length and how often it is evaluated, both in cycles.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Span {
    /// Newest cycles in the window.
    pub cycles: usize,
    /// It is evaluated when the number of cycles so far is a multiple of this.
    pub every: usize,
}

const fn span(cycles: usize, every: usize) -> Span {
    Span { cycles, every }
}

/// The watch's windows, evaluated at every tenth of their length.
pub const SPANS: &[Span] = &[
    span(5, 1),
    span(10, 1),
    span(20, 2),
    span(40, 4),
    span(80, 8),
    span(160, 16),
    span(320, 32),
    span(640, 64),
];

/// What turns a tail probability into the z threshold that governs clustering.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Kind {
    /// One contrast per evaluation: a z.
    Contrast,
    /// A sum of squares over the sources (chi-square with k − 1 degrees; Welch and the blocked test
    /// behave like it): √q − (k − 2)/√q.
    Squares {
        /// Sources compared.
        sources: usize,
    },
    /// The range of the sources: q/√2.
    Range {
        /// Sources compared.
        sources: usize,
    },
}

impl Kind {
    /// The z threshold of clustering at the tail probability `alpha`.
    fn z(self, alpha: f64) -> f64 {
        let found = match self {
            Self::Contrast => normal::isf(alpha),
            Self::Squares { sources } => {
                let k = sources.max(2) as f64;
                chi_square::isf(alpha, k - 1.0).map(|q| q.sqrt() - (k - 2.0) / q.sqrt())
            }
            Self::Range { sources } => {
                let q = range_quantile(alpha, sources, f64::INFINITY);
                Ok(q * std::f64::consts::FRAC_1_SQRT_2)
            }
        };
        // Alpha is clamped to where every quantile exists; the floor keeps g within its meaning.
        found.map_or(1.0, |z| z.max(1.0))
    }
}

/// Windows of one test that share one tail probability.
#[derive(Clone, Copy, Debug)]
pub struct Overlap<'a> {
    /// Length and step of each window, in values per source (of the slowest source), any positive reals.
    pub windows: &'a [(f64, f64)],
    /// How the statistic clusters.
    pub kind: Kind,
    /// Calls not shared between spans: 1 to count every span's calls in full. Simulated: 0.90 for one
    /// span, 1.0 for four a factor 4 apart, 1.05 to 1.2 for eight a factor 2 apart.
    pub clusters: f64,
}

impl Overlap<'_> {
    /// The tail probability of each evaluation of each window that gives `rate` false calls per value,
    /// at most a half and at least 1e-15. A rate that is no positive number gives 1e-15.
    pub fn alpha(&self, rate: f64) -> f64 {
        // g depends on ln alpha only: a few rounds settle it.
        (0..6).fold(1e-5, |alpha, _| {
            let z = self.kind.z(alpha);
            alpha_at(self.windows, rate, self.clusters, |_| z)
        })
    }
}

/// The alpha that gives `rate` when window number i clusters as a z threshold `z(i)`.
pub(super) fn alpha_at(
    windows: &[(f64, f64)],
    rate: f64,
    clusters: f64,
    z: impl Fn(usize) -> f64,
) -> f64 {
    let begin = |(i, &(length, step)): (usize, &(f64, f64))| {
        let (length, step) = (length.max(1.0), step.max(f64::MIN_POSITIVE));
        first_crossings(z(i), step / length) * clusters / step
    };
    let per_alpha: f64 = windows.iter().enumerate().map(begin).sum();
    let alpha = rate / per_alpha;
    if alpha > 0.0 {
        alpha.clamp(1e-15, 0.5)
    } else {
        1e-15
    }
}

/// The share g of evaluations above `z` that begin a cluster, windows being renewed by `renewed` of
/// their length (1 and more: no overlap) between evaluations.
fn first_crossings(z: f64, renewed: f64) -> f64 {
    let x = z * (2.0 * renewed).sqrt();
    (0.5 * x * x * nu(x)).min(1.0)
}
