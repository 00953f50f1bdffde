//! How the call budget is divided over the watch's parts. Rates add.

use super::Basis;
use super::dependence::{factor, score_phi};
use serde::{Deserialize, Serialize};

/// Level's share of the budget, its parts together.
const LEVEL: f64 = 0.8;
/// Share of sources that turn erratic.
const ERRATIC: f64 = 0.15;
/// Share of sources that go quiet.
const QUIET: f64 = 0.05;

/// A part of the watch.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Part {
    /// Few sources moved.
    Few,
    /// Many sources moved.
    Split,
    /// Two sources apart in opposite directions.
    Pair,
    /// A source turned erratic.
    Erratic,
    /// A source went quiet.
    Quiet,
}

impl Part {
    /// All parts in order.
    pub const ALL: [Self; 5] = [
        Self::Few,
        Self::Split,
        Self::Pair,
        Self::Erratic,
        Self::Quiet,
    ];

    /// The share of the budget that the part runs at in a bank of `sources`; none when it is off. The
    /// level parts often call together, the more so the fewer the sources, so their shares add up to
    /// more than level's (see [`overlap`]). With two sources level keeps its share: the spread test of
    /// the look has the rest.
    pub fn share(self, sources: usize) -> Option<f64> {
        let level = |weight: f64| Some(LEVEL * overlap(sources) * weight);
        match (self, sources) {
            (Self::Few, ..=2) => level(1.0),
            (Self::Few, 3) => level(0.62),
            (Self::Pair, 3) => level(0.38),
            (Self::Few, _) => level(0.52),
            (Self::Split, 4..) => level(0.29),
            (Self::Pair, 4..) => level(0.19),
            (Self::Erratic, 3..) => Some(ERRATIC),
            (Self::Quiet, 3..) => Some(QUIET),
            _ => None,
        }
    }

    /// Mean cycles to a false call of this part, dependence paid for; none when it is off.
    pub fn cycles(self, basis: &Basis) -> Option<f64> {
        let phi = match self {
            Self::Few | Self::Split | Self::Pair => basis.phi,
            Self::Erratic | Self::Quiet => score_phi(basis.phi),
        };
        let share = self.share(basis.sources)?;
        Some(basis.cycles_per_false_call / (share * factor(phi)))
    }
}

/// By how much the shares of level's parts may add up to more than level's, because they call together:
/// simulated so that the parts together keep level's share at a margin of 0 and at the worst offsets of a
/// quarter of an sd (the budget's scarcest margin). One part alone overlaps nothing.
fn overlap(sources: usize) -> f64 {
    match sources {
        ..=2 => 1.0,
        3 => 1.25,
        _ => 1.05 + 1.2 / sources as f64,
    }
}
