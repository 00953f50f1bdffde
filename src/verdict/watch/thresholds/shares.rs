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
    /// level parts overlap, so together they may run at a little more than level's share (simulated:
    /// two equal parts at 1.9 times level's mean cycles each, three as set here).
    pub fn share(self, sources: usize) -> Option<f64> {
        let level = |weight: f64| Some(LEVEL * weight);
        match (self, sources) {
            (Self::Few, ..=2) => level(1.0),
            (Self::Few, 3) => level(0.70),
            (Self::Pair, 3) => level(0.40),
            (Self::Few, _) => level(0.55),
            (Self::Split, 4..) => level(0.30),
            (Self::Pair, 4..) => level(0.20),
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
