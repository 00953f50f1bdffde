//! From the call budget to the thresholds of the watch, in closed form.
//!
//! Owns the watch's spans, the shares of its parts and every formula between "one false call in so many
//! cycles" and a number that a statistic is compared with. Pure and total: any [`Basis`] gives finite
//! thresholds. Deliberately absent: the statistics themselves (the streams own them) and sigma.
//!
//! | part | threshold | file |
//! | --- | --- | --- |
//! | few sources moved | rate of the likelihood ratio over all starts at the worst offsets | [`starts`] |
//! | many sources moved | chi-square or union bound, one alpha for all spans | [`split`], [`spans`] |
//! | two sources apart | studentized range or union bound, one alpha for all spans | [`pair`], [`spans`] |
//! | spread, up and down | the same rate on normal scores | [`scores`] |
//! | all | shares of the budget; dependence; t for an estimated sigma | [`shares`], [`dependence`] |
//!
//! Realised / nominal mean cycles of level's parts together, sigma known, level's budget 3 000 cycles,
//! simulated (error 0.04 to 0.08): margin 0: k = 3, 4, 12, 60: 1.09, 1.20, 1.06, 1.04 (30 000 cycles, k = 4,
//! 12: 1.03, 1.07; phi 0.1, k = 12: 1.07). Half the bank at the margin, 0.25, 0.5, 1 sd: k = 4: 1.07, 1.04, 1.32;
//! k = 12: 1.07, 1.04, 1.54; one source there: k = 4: 1.15, 1.21, 1.21; k = 12: 1.66, 1.70 (0.25, 0.5). Two
//! sources, margin 0.25 and 1: 1.03, 1.04. Offsets well inside the margin call far less.

mod account;
mod dependence;
mod nu;
mod pair;
mod scores;
mod shares;
mod solve;
mod spans;
mod split;
mod starts;
mod tails;

pub use account::{Account, Entry, account};
pub use dependence::score_phi;
pub use shares::Part;
pub use spans::{Kind, Overlap, SPANS, Span};

use scores::Turn;
use serde::{Deserialize, Serialize};
use split::{Root, Split};
use tails::t_of_normal;

/// What thresholds depend on. All lengths in cycles, offsets in sd of one source's noise.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Basis {
    /// Sources compared (2 or more).
    pub sources: usize,
    /// The margin between two sources over sigma (0 or more).
    pub margin_sd: f64,
    /// Largest ratio of two sds that does not matter (1 or more), for the spread parts.
    pub spread_margin: f64,
    /// Mean cycles to a false call asked for, all parts together.
    pub cycles_per_false_call: f64,
    /// Lag-one correlation that is paid for (0..0.99).
    pub phi: f64,
    /// Degrees of freedom of the sigma estimate (infinite when known).
    pub df: f64,
}

impl Basis {
    /// The basis within the range where the formulas mean something; what is no number takes the side
    /// that calls less.
    fn clamped(&self) -> Self {
        let within = |x: f64, low: f64, high: f64, no_number: f64| {
            if x.is_nan() {
                no_number
            } else {
                x.clamp(low, high)
            }
        };
        Self {
            // One source has nothing to be compared with; beyond 5 000 factorial tables grow idle.
            sources: self.sources.clamp(2, 5_000),
            // At 1 000 sd only the source at the margin itself can call.
            margin_sd: within(self.margin_sd, 0.0, 1e3, 1e3),
            spread_margin: within(self.spread_margin, 1.0, 1e2, 1e2),
            // Below 100 cycles false calls are no rare clusters; beyond 1e12 tails leave their tables.
            cycles_per_false_call: within(self.cycles_per_false_call, 1e2, 1e12, 1e12),
            // Negative correlation is not paid out.
            phi: within(self.phi, 0.0, 0.99, 0.99),
            // Fewer degrees than these and the watch is still learning.
            df: within(self.df, 20.0, f64::INFINITY, 20.0),
        }
    }
}

/// The thresholds of every part; a part that is off for this bank is None.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Thresholds {
    /// Few sources: standardised (z) threshold on the root of the likelihood-ratio statistic; for two
    /// sources that of the one two-sided statistic (two one-sided streams).
    pub few: f64,
    /// Split contrast, one per span of [`SPANS`], on the (squared) statistic; with a margin of 0 on the
    /// sum of squares over the sources. None for fewer than 4 sources.
    pub split: Option<Vec<f64>>,
    /// Range (two sources apart), one per span of [`SPANS`], on the studentized range statistic. None for
    /// fewer than 3 sources.
    pub pair: Option<Vec<f64>>,
    /// Spread upward: z threshold. None for two sources.
    pub erratic: Option<f64>,
    /// Spread downward: z threshold. None for two sources.
    pub quiet: Option<f64>,
}

/// Clusters shared between the watch's windows of one statistic (simulated).
const CLUSTERS: f64 = 1.0;

/// The thresholds that keep the budget at the worst offsets within the margins. Total: a basis out of
/// range is clamped, and every threshold is finite and positive.
pub fn thresholds(basis: &Basis) -> Thresholds {
    let basis = basis.clamped();
    let rate = |part: Part| part.cycles(&basis).map(f64::recip);
    let few_rate = rate(Part::Few).unwrap_or(0.0);
    let few = starts::threshold(few_rate, |s| {
        starts::worst_rate(s, basis.sources, basis.margin_sd)
    });
    let spread = |turn: Turn, part: Part| {
        let standings = scores::standings(basis.sources, basis.spread_margin, turn);
        let z = starts::threshold(rate(part)?, |s| scores::worst_rate(s, &standings));
        Some(t_of_normal(z, basis.df))
    };
    Thresholds {
        few: t_of_normal(few, basis.df),
        split: rate(Part::Split).map(|rate| split_thresholds(&basis, rate)),
        pair: rate(Part::Pair).map(|rate| pair_thresholds(&basis, rate)),
        erratic: spread(Turn::Erratic, Part::Erratic),
        quiet: spread(Turn::Quiet, Part::Quiet),
    }
}

/// The watch's windows as the overlap rule wants them.
fn windows() -> Vec<(f64, f64)> {
    let window = |s: &Span| (s.cycles as f64, s.every as f64);
    SPANS.iter().map(window).collect()
}

/// Thresholds of the squared split contrast. Under its union bound it clusters as a z of √q.
fn split_thresholds(basis: &Basis, rate: f64) -> Vec<f64> {
    let windows = windows();
    let sources = basis.sources;
    let overlap = Overlap {
        windows: &windows,
        kind: Kind::Squares { sources },
        clusters: CLUSTERS,
    };
    let first = overlap.alpha(rate);
    if basis.margin_sd <= 0.0 {
        return vec![split::squares(first, sources, basis.df); windows.len()];
    }
    let ceiling = split::squares(first, sources, f64::INFINITY).sqrt();
    let mut split = Split::new(sources);
    let reach = |s: &Span| basis.margin_sd * (s.cycles as f64).sqrt();
    let unions = SPANS.iter().map(|s| split.union(first, reach(s), ceiling));
    let unions: Vec<Option<Root>> = unions.collect();
    let clustering = |i: usize| match unions[i] {
        Some(root) => root.moved(0.0),
        None => ceiling - (sources as f64 - 2.0) / ceiling,
    };
    let alpha = spans::alpha_at(&windows, rate, CLUSTERS, |i| clustering(i).max(1.0));
    let squares = split::squares(alpha, sources, basis.df);
    let with_union = |root: Root| t_of_normal(root.moved((alpha / first).ln()), basis.df).powi(2);
    let of_span =
        |union: &Option<Root>| union.map_or(squares, |root| with_union(root).min(squares));
    unions.iter().map(of_span).collect()
}

/// Thresholds of the range beyond the margin.
fn pair_thresholds(basis: &Basis, rate: f64) -> Vec<f64> {
    let overlap = Overlap {
        windows: &windows(),
        kind: Kind::Range {
            sources: basis.sources,
        },
        clusters: CLUSTERS,
    };
    let alpha = overlap.alpha(rate);
    let reach = |s: &Span| basis.margin_sd * (s.cycles as f64).sqrt();
    let of_span = |s: &Span| pair::quantile(alpha, basis.sources, reach(s), basis.df);
    SPANS.iter().map(of_span).collect()
}

#[cfg(test)]
mod tests;
