//! What waits to be confirmed, in the order of delivery.
//!
//! What must hold: the head stays the head until it is confirmed; deliveries of one notice leave in
//! their order; every number that came in is given back once, when it or what replaced it was
//! confirmed. While the other side is away, a later delivery of a notice in the same state takes the
//! place of the one before (only its figures moved), so the queue is bounded by the changes of state.

use std::collections::VecDeque;

use crate::notice::Delivery;

/// Deliveries waiting for their confirmation.
#[derive(Debug, Default)]
pub struct Queue {
    waiting: VecDeque<Waiting>,
    /// So many of the first are out.
    out: usize,
}

#[derive(Debug)]
struct Waiting {
    delivery: Delivery,
    replaced: Vec<u64>,
}

impl Queue {
    /// Takes one in. A number that already waits is left alone.
    pub fn push(&mut self, delivery: Delivery) {
        if self.waiting.iter().any(|w| w.has(delivery.number)) {
            return;
        }
        let same = |w: &&mut Waiting| w.delivery.notice.id == delivery.notice.id;
        let newest = self.waiting.iter_mut().skip(self.out).rev().find(same);
        match newest {
            Some(w) if w.delivery.notice.state == delivery.notice.state => {
                w.replaced.push(w.delivery.number);
                w.delivery = delivery;
            }
            _ => self.waiting.push_back(Waiting {
                delivery,
                replaced: Vec::new(),
            }),
        }
    }

    /// The next one to send; it counts as out from here on.
    pub fn send_head(&mut self) -> Option<&Delivery> {
        let head = self.waiting.front()?;
        self.out = 1;
        Some(&head.delivery)
    }

    /// Everything that waits, oldest first; all of it counts as out from here on.
    pub fn send_all(&mut self) -> impl Iterator<Item = &Delivery> {
        self.out = self.waiting.len();
        self.waiting.iter().map(|w| &w.delivery)
    }

    /// The number that is told about when sending fails.
    pub fn head(&self) -> Option<u64> {
        self.waiting.front().map(|w| w.delivery.number)
    }

    /// The other side has confirmed what is out: the numbers that are done with, oldest first.
    pub fn confirmed(&mut self) -> Vec<u64> {
        let out = std::mem::take(&mut self.out);
        let done = self.waiting.drain(..out);
        let numbers = done.flat_map(|w| w.replaced.into_iter().chain([w.delivery.number]));
        numbers.collect()
    }

    /// What is out may or may not have arrived, so it is to be sent again.
    pub fn lost(&mut self) {
        self.out = 0;
    }

    /// How many wait.
    pub fn len(&self) -> usize {
        self.waiting.len()
    }
}

impl Waiting {
    fn has(&self, number: u64) -> bool {
        self.delivery.number == number || self.replaced.contains(&number)
    }
}

#[cfg(test)]
pub(super) mod tests {
    use std::sync::Arc;

    use super::*;
    use crate::model::{Time, US_PER_S};
    use crate::notice::{Kind, NamedSource, Notice, Priority, Since, State, Way};

    /// A delivery of an invented notice.
    pub fn delivery(number: u64, id: &str, state: State) -> Delivery {
        let at = Time::from_us(number as i64 * US_PER_S);
        let since = Since {
            at,
            earliest: at,
            latest: at,
        };
        let named = NamedSource {
            source: "07".into(),
            deviation: -1.25,
            low: -1.5,
            high: -1.0,
        };
        let notice = Notice {
            id: id.into(),
            plant: "Quayside".into(),
            bank: "filler 2".into(),
            kind: Kind::LevelApart,
            state,
            priority: Priority::Medium,
            sources: vec![named],
            unit: "g".into(),
            since,
            raised: at,
            changed: at,
            returned: None,
            acknowledged: None,
            subject: "filler 2: 07 low by 1.3 g".to_owned(),
            text: "Source 07 is low.".to_owned(),
            advice: "Check valve 07.".to_owned(),
            url: "http://127.0.0.1:7310/banks/filler%202".to_owned(),
            span: 40,
            handling: crate::notice::Handling::default(),
            pattern: None,
            slip: None,
            common_movement: None,
            even_mean: None,
            cost_per_hour: None,
            adjustment: None,
        };
        Delivery {
            number,
            way: Way::Mqtt,
            at,
            notice: Arc::new(notice),
        }
    }

    fn sent(queue: &mut Queue) -> Option<u64> {
        queue.send_head().map(|d| d.number)
    }

    #[test]
    fn the_head_stays_until_it_is_confirmed() {
        let mut queue = Queue::default();
        assert_eq!(sent(&mut queue), None);
        queue.push(delivery(1, "a", State::Unacknowledged));
        queue.push(delivery(2, "b", State::Unacknowledged));
        assert!(queue.confirmed().is_empty());
        assert_eq!(sent(&mut queue), Some(1));
        queue.lost();
        assert!(queue.confirmed().is_empty());
        assert_eq!(sent(&mut queue), Some(1));
        assert_eq!(queue.confirmed(), [1]);
        assert_eq!(sent(&mut queue), Some(2));
        assert_eq!(queue.confirmed(), [2]);
        assert_eq!(queue.len(), 0);
    }

    #[test]
    fn newer_figures_replace_older_ones_but_never_a_change_of_state_or_what_is_out() {
        let mut queue = Queue::default();
        queue.push(delivery(1, "a", State::Unacknowledged));
        assert_eq!(sent(&mut queue), Some(1));
        queue.push(delivery(2, "a", State::Unacknowledged));
        queue.push(delivery(3, "b", State::Unacknowledged));
        queue.push(delivery(4, "a", State::Unacknowledged));
        queue.push(delivery(5, "a", State::Acknowledged));
        queue.push(delivery(6, "a", State::Unacknowledged));
        assert_eq!(queue.len(), 5);
        assert_eq!(queue.confirmed(), [1]);
        assert_eq!(sent(&mut queue), Some(4));
        assert_eq!(queue.confirmed(), [2, 4]);
        assert_eq!(sent(&mut queue), Some(3));
        assert_eq!(queue.confirmed(), [3]);
        assert_eq!(sent(&mut queue), Some(5));
        assert_eq!(queue.confirmed(), [5]);
        assert_eq!(sent(&mut queue), Some(6));
    }

    #[test]
    fn all_can_be_out_at_once() {
        let mut queue = Queue::default();
        queue.push(delivery(1, "a", State::Unacknowledged));
        queue.push(delivery(2, "a", State::Unacknowledged));
        queue.push(delivery(3, "a", State::Acknowledged));
        let out: Vec<u64> = queue.send_all().map(|d| d.number).collect();
        assert_eq!(out, [2, 3]);
        queue.push(delivery(4, "a", State::Acknowledged));
        assert_eq!(queue.confirmed(), [1, 2, 3]);
        assert_eq!(queue.confirmed(), Vec::<u64>::new());
        assert_eq!(sent(&mut queue), Some(4));
    }

    #[test]
    fn a_number_that_waits_is_not_taken_twice() {
        let mut queue = Queue::default();
        queue.push(delivery(1, "a", State::Unacknowledged));
        queue.push(delivery(2, "a", State::Unacknowledged));
        queue.push(delivery(1, "a", State::Unacknowledged));
        queue.push(delivery(2, "a", State::Unacknowledged));
        assert_eq!(sent(&mut queue), Some(2));
        assert_eq!(queue.confirmed(), [1, 2]);
        assert_eq!(queue.len(), 0);
    }

    proptest::proptest! {
        #[test]
        fn whatever_happens_every_number_comes_back_once_and_each_notice_keeps_its_order(
            steps in proptest::collection::vec((0_u8..4, 0_usize..3, proptest::bool::ANY), 1..80)
        ) {
            let mut queue = Queue::default();
            let (mut number, mut done, mut seen) = (0, Vec::new(), Vec::new());
            for (step, notice, state) in steps {
                match step {
                    0 | 1 => {
                        number += 1;
                        let state = if state { State::Unacknowledged } else { State::Acknowledged };
                        queue.push(delivery(number, ["a", "b", "c"][notice], state));
                    }
                    2 => {
                        if let Some(d) = queue.send_head() { seen.push((d.notice.id.clone(), d.number)); }
                        done.extend(queue.confirmed());
                    }
                    _ => { queue.send_head(); queue.lost(); }
                }
            }
            while let Some(d) = queue.send_head() {
                seen.push((d.notice.id.clone(), d.number));
                done.extend(queue.confirmed());
            }
            for id in ["a", "b", "c"] {
                let own: Vec<u64> = seen.iter().filter(|s| &*s.0 == id).map(|s| s.1).collect();
                proptest::prop_assert!(own.is_sorted(), "{:?}", own);
            }
            done.sort_unstable();
            proptest::prop_assert_eq!(done, (1..=number).collect::<Vec<_>>());
        }
    }
}
