//! How the call budget is shared out over the looks: by the union bound, or, where looks overlap and the
//! bank's rate is known, by how much they have in common.

use crate::model::Bank;

use super::watch::thresholds::{Kind, Overlap};

/// Level's share of the budget; the rest is for spread. A level that drifts is the commoner fault.
const LEVEL_SHARE: f64 = 0.8;

/// Where sources share cycles looks decide only while the watch learns, with this part of the budget:
/// whatever a bank's first hours bring, most of the budget is left.
const WHILE_LEARNING: f64 = 0.5;

/// Clusters shared between the spans (simulated: realised over nominal 0.9 to 1.06 for Welch).
const CLUSTERS: f64 = 1.0;

/// What one look over one span may spend.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Shares {
    /// Probability of a false call for level.
    pub level: f64,
    /// Probability of a false call for spread.
    pub spread: f64,
}

impl Shares {
    /// The budget divided by looks times spans, so that all looks over all spans together stay inside
    /// it whatever they have in common (union bound).
    pub fn of(bank: &Bank) -> Self {
        let own = if bank.is_watched() {
            WHILE_LEARNING
        } else {
            1.0
        };
        let per_look = own * bank.budget.per_us() * bank.look_every_us as f64;
        // A budget so large that a single look could spend more than a half asks for no test at all.
        let each = (per_look / bank.spans.len().max(1) as f64).min(0.5);
        Self {
            level: LEVEL_SHARE * each,
            spread: (1.0 - LEVEL_SHARE) * each,
        }
    }

    /// For a bank whose looks decide for good: a window of n values looked at every L values shares most of
    /// them with the look before, and the union bound would leave half the budget and more unspent. The
    /// interval is that between values of the slowest source.
    pub fn overlapping(bank: &Bank, sources: usize, interval_us: i64) -> Self {
        let union = Self::of(bank);
        let interval_us = interval_us.max(1) as f64;
        let step = (bank.look_every_us as f64 / interval_us).max(1.0);
        let windows: Vec<(f64, f64)> = bank.spans.iter().map(|n| (*n as f64, step)).collect();
        let kind = if bank.margin > 0.0 {
            Kind::Range { sources }
        } else {
            Kind::Squares { sources }
        };
        let overlap = Overlap {
            windows: &windows,
            kind,
            clusters: CLUSTERS,
        };
        let per_value = LEVEL_SHARE * bank.budget.per_us() * interval_us;
        Self {
            level: overlap.alpha(per_value).clamp(union.level, 0.5),
            spread: union.spread,
        }
    }
}
