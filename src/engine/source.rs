//! One source as its bank knows it, besides its window.

use serde::{Deserialize, Serialize};

use crate::model::{Bank, Name, Time};
use crate::verdict::Usual;
use crate::window::Ring;

use super::SourceState;

/// A discovered source takes part after this many values.
const NEW_UNTIL: u64 = 50;

/// A source is silent after this many of its usual intervals, and never before two minutes.
const SILENT_INTERVALS: i64 = 20;
const SILENT_AT_LEAST_US: i64 = 120_000_000;

/// Neighbouring values from which the usual interval is told (their median).
const INTERVALS: usize = 21;

/// What is remembered of a source.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Source {
    pub name: Name,
    /// Discovered rather than listed.
    pub discovered: bool,
    /// No longer in the configuration.
    pub retired: bool,
    pub accepted: u64,
    pub last_value: Option<f64>,
    pub last_taken: Option<Time>,
    pub last_received: Option<Time>,
    pub silent: bool,
    /// Taken out of use by a person.
    pub out_of_use: bool,
    /// When it was last put back in use.
    pub in_use_since: Option<Time>,
    /// Where it usually stands, once that is learnt.
    pub usual: Option<Usual>,
    /// The margin with which it is watched since it cleared, where that is above the bank's.
    pub cleared_margin: f64,
}

impl Source {
    pub fn new(name: Name, discovered: bool) -> Self {
        Self {
            name,
            discovered,
            retired: false,
            accepted: 0,
            last_value: None,
            last_taken: None,
            last_received: None,
            silent: false,
            out_of_use: false,
            in_use_since: None,
            usual: None,
            cleared_margin: 0.0,
        }
    }

    pub fn state(&self) -> SourceState {
        match self {
            Self {
                out_of_use: true, ..
            } => SourceState::OutOfUse,
            Self { silent: true, .. } => SourceState::Silent,
            Self { accepted: 0, .. } => SourceState::Awaited,
            Self {
                discovered: true,
                accepted,
                ..
            } if *accepted < NEW_UNTIL => SourceState::New,
            _ => SourceState::Present,
        }
    }

    /// Whether looks compare it.
    pub fn takes_part(&self) -> bool {
        let enough = if self.discovered { NEW_UNTIL } else { 1 };
        !self.retired && !self.out_of_use && self.accepted >= enough
    }

    /// When it counts as silent if nothing arrives; `began` is when the bank or the line last started, and
    /// nobody is silent for what came before.
    pub fn silent_from(&self, bank: &Bank, ring: &Ring, began: Time) -> Time {
        let limit = bank.silent_after_us.unwrap_or_else(|| {
            let usual = usual_interval_us(ring).unwrap_or(0);
            usual
                .saturating_mul(SILENT_INTERVALS)
                .max(SILENT_AT_LEAST_US)
        });
        let heard = self.last_received.max(self.in_use_since);
        heard.unwrap_or(began).max(began).plus_us(limit)
    }
}

/// The median time between the newest values of a source, in microseconds.
pub fn usual_interval_us(ring: &Ring) -> Option<i64> {
    let taken: Vec<i64> = ring
        .iter()
        .rev()
        .take(INTERVALS + 1)
        .map(|e| e.taken.us())
        .collect();
    let mut gaps: Vec<i64> = taken.windows(2).map(|w| (w[0] - w[1]).abs()).collect();
    gaps.sort_unstable();
    gaps.get(gaps.len() / 2).copied()
}
