//! What waits to be taken by the engine.
//!
//! What must hold: bounded memory. QoS 1 has room for all that a broker may send unacknowledged, and
//! when even that is full the connection is not read any further, so the broker waits. QoS 0 cannot
//! wait: beyond its share it is refused as overflow, and only so many refusals are kept. The
//! condition of the connection overtakes; only the newest counts.

use std::collections::VecDeque;

use crate::engine::Condition;
use crate::intake::arrival::{Arrival, Receipt};
use crate::model::Refusal;

use super::FromBroker;

/// How many overflow refusals are kept until the engine takes them; beyond it they are only counted
/// in the log, as one line.
const MOST_OVERFLOW: usize = 1000;

/// A message with many measurements takes the room of one for each of so many.
const ITEMS_IN_ONE: usize = 64;

/// The queue.
#[derive(Debug)]
pub(super) struct Queue {
    condition: Option<Condition>,
    arrivals: VecDeque<Arrival>,
    /// The room that they take.
    taken: usize,
    overflow: Vec<Refusal>,
    /// Overflow beyond [`MOST_OVERFLOW`].
    uncounted: u64,
    /// Room for messages that need no acknowledgement.
    share: usize,
    /// Room for all.
    most: usize,
}

impl Queue {
    /// A queue for a broker that sends up to `receive_maximum` messages unacknowledged. Some brokers
    /// take that softly, and MQTT 3.1.1 has no such bound: hence the slack.
    pub(super) fn new(receive_maximum: u16) -> Self {
        let share = usize::from(receive_maximum).max(1000);
        Self {
            condition: None,
            arrivals: VecDeque::new(),
            taken: 0,
            overflow: Vec::new(),
            uncounted: 0,
            share,
            most: 4 * share,
        }
    }

    /// Whether nothing more may be read from the connection.
    pub(super) fn is_full(&self) -> bool {
        self.taken >= self.most
    }

    /// Whether there is room for a message of QoS 0.
    pub(super) fn has_share(&self) -> bool {
        self.taken < self.share
    }

    /// Queues an arrival.
    pub(super) fn push(&mut self, arrival: Arrival) {
        self.taken += room(&arrival);
        self.arrivals.push_back(arrival);
    }

    /// Queues the refusals of a message that found no room.
    pub(super) fn overflowed(&mut self, refusals: Vec<Refusal>) {
        for refusal in refusals {
            if self.overflow.len() < MOST_OVERFLOW {
                self.overflow.push(refusal);
            } else {
                self.uncounted += 1;
            }
        }
    }

    /// Queues the condition; an older one that was not taken yet is out of date.
    pub(super) fn set(&mut self, condition: Condition) {
        self.condition = Some(condition);
    }

    /// Whether nothing waits.
    pub(super) fn is_empty(&self) -> bool {
        self.condition.is_none() && self.arrivals.is_empty() && self.overflow.is_empty()
    }

    /// What is taken next.
    pub(super) fn pop(&mut self) -> Option<FromBroker> {
        if let Some(condition) = self.condition.take() {
            return Some(FromBroker::Condition(condition));
        }
        if let Some(arrival) = self.arrivals.pop_front() {
            self.taken = self.taken.saturating_sub(room(&arrival));
            return Some(FromBroker::Arrival(arrival));
        }
        if self.overflow.is_empty() {
            return None;
        }
        if self.uncounted > 0 {
            tracing::warn!(
                messages = self.uncounted,
                "more messages of QoS 0 were lost than are counted, because they came faster than they could be kept; publish with QoS 1"
            );
            self.uncounted = 0;
        }
        Some(FromBroker::Arrival(Arrival {
            measurements: Vec::new(),
            refusals: std::mem::take(&mut self.overflow),
            // Nothing to acknowledge.
            receipt: Receipt {
                epoch: 0,
                packet: None,
                hash: 0,
            },
        }))
    }
}

/// The room that an arrival takes.
fn room(arrival: &Arrival) -> usize {
    1 + (arrival.measurements.len() + arrival.refusals.len()) / ITEMS_IN_ONE
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::Reason;

    fn arrival(hash: u64) -> Arrival {
        let receipt = Receipt {
            epoch: 1,
            packet: Some(1),
            hash,
        };
        Arrival {
            measurements: Vec::new(),
            refusals: Vec::new(),
            receipt,
        }
    }

    fn refusal() -> Refusal {
        Refusal {
            bank: None,
            reason: Reason::Overflow,
            topic: "t".into(),
            detail: String::new(),
            excerpt: String::new(),
        }
    }

    #[test]
    fn the_condition_overtakes_and_only_the_newest_counts() {
        let mut queue = Queue::new(10);
        queue.push(arrival(1));
        queue.push(arrival(2));
        queue.set(Condition::Starting);
        queue.set(Condition::Well);
        let got: Vec<_> = std::iter::from_fn(|| queue.pop()).collect();
        let expected = [
            FromBroker::Condition(Condition::Well),
            FromBroker::Arrival(arrival(1)),
            FromBroker::Arrival(arrival(2)),
        ];
        assert_eq!(got, expected);
        assert!(queue.is_empty());
    }

    #[test]
    fn messages_of_many_measurements_take_more_room() {
        let mut queue = Queue::new(10);
        let many = Arrival {
            refusals: vec![refusal(); 10_000],
            ..arrival(0)
        };
        while !queue.is_full() {
            queue.push(many.clone());
        }
        // 4000 places of 64 items each, or one place more.
        assert_eq!(queue.arrivals.len(), 4000_usize.div_ceil(157));
        while queue.pop().is_some() {}
        assert!(queue.has_share() && queue.taken == 0);
    }

    #[test]
    fn memory_is_bounded() {
        let mut queue = Queue::new(10);
        let mut at_once = 0;
        while !queue.is_full() {
            at_once += u64::from(queue.has_share());
            queue.push(arrival(0));
        }
        assert_eq!((at_once, queue.arrivals.len()), (1000, 4000));
        for _ in 0..2 * MOST_OVERFLOW {
            queue.overflowed(vec![refusal()]);
        }
        assert_eq!(
            (queue.overflow.len(), queue.uncounted),
            (MOST_OVERFLOW, MOST_OVERFLOW as u64)
        );
        let last = std::iter::from_fn(|| queue.pop()).last();
        assert!(matches!(last, Some(FromBroker::Arrival(a)) if a.refusals.len() == MOST_OVERFLOW));
        assert!(queue.is_empty());
    }
}
