//! What a source's own counting says about doubles.
//!
//! Two cases that times cannot settle: several values with one time (whole seconds, say) and different
//! numbers are no doubles; and numbers that are held already, rising again with other values, are a
//! counter that started anew and no redelivery, which repeats values too.

use std::collections::VecDeque;

use serde::{Deserialize, Serialize};

use crate::model::Time;

use super::Arriving;

/// Numbers remembered: far more values than a source takes within one step of a clock.
const REMEMBERED: usize = 32;

/// One source's numbers.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Numbers {
    recent: VecDeque<(Time, i64)>,
    /// The last number that came again with another value, and how many in a row rose to it.
    contradiction: Option<(i64, u32)>,
}

impl Numbers {
    /// Remembers the number of a value that was taken in, where its time alone could not tell it from
    /// the next.
    pub fn remember(&mut self, arriving: &Arriving) {
        self.contradiction = None;
        let Some(cycle) = arriving.cycle.filter(|_| arriving.time_given) else {
            return;
        };
        let latest = self.recent.back().map(|(taken, _)| *taken);
        if latest.is_some_and(|taken| taken != arriving.taken) {
            self.recent.clear();
        }
        if self.recent.len() == REMEMBERED {
            self.recent.pop_front();
        }
        self.recent.push_back((arriving.taken, cycle));
    }

    /// Whether this value has another number than every remembered one of its time.
    pub fn is_another(&self, arriving: &Arriving) -> bool {
        let Some(cycle) = arriving.cycle else {
            return false;
        };
        let same_time = || self.recent.iter().filter(|(t, _)| *t == arriving.taken);
        same_time().next().is_some() && same_time().all(|(_, c)| *c != cycle)
    }

    /// A number that is held came again; with the `same` value it is a redelivery. Says how many in a
    /// row have risen with other values.
    pub fn contradicted(&mut self, cycle: Option<i64>, same: bool) -> u32 {
        let run = match (cycle, self.contradiction) {
            (None, _) => None,
            _ if same => None,
            (Some(c), Some((last, run))) if c > last => Some((c, run + 1)),
            (Some(c), _) => Some((c, 1)),
        };
        self.contradiction = run;
        run.map_or(0, |(_, n)| n)
    }
}
