//! How the call budget is shared out over the looks, by the union bound.

use crate::model::Bank;

/// Level's share of the budget; the rest is for spread. A level that drifts is the commoner fault.
const LEVEL_SHARE: f64 = 0.8;

/// Where sources share cycles looks decide only while the watch learns, with this part of the budget:
/// whatever a bank's first hours bring, most of the budget is left.
const WHILE_LEARNING: f64 = 0.5;

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
        let own = if bank.pairing.is_paired() {
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
}
