//! What waits at an outlet: a lane for each notice, so that one that cannot be sent does not keep
//! another from being sent, while the deliveries of one notice keep their order.
//!
//! What must hold: something new is tried at once; what failed waits by its schedule, and no longer
//! once anything gets through; every number comes back once. Times are those since a start that the
//! caller keeps. Deliberately absent: sending, clocks, and chance, which is handed in.

use std::time::Duration;

use crate::model::Name;
use crate::notice::Delivery;

use super::letter::Letter;
use super::queue::Queue;
use super::retry::Schedule;

/// The lanes.
#[derive(Debug)]
pub struct Lanes {
    lanes: Vec<Lane>,
    schedule: Schedule,
    /// The other side asked for quiet until then.
    quiet_until: Duration,
    /// The other side wants nothing more.
    is_closed: bool,
}

#[derive(Debug)]
struct Lane {
    notice: Name,
    queue: Queue,
    failures: usize,
    due: Duration,
    is_out: bool,
}

/// When there is something to send.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Next {
    /// Now.
    Now,
    /// After this long.
    In(Duration),
    /// Not before something new comes.
    Never,
}

impl Lanes {
    /// Nothing waits yet.
    pub fn new(schedule: Schedule) -> Self {
        Self {
            lanes: Vec::new(),
            schedule,
            quiet_until: Duration::ZERO,
            is_closed: false,
        }
    }

    /// Takes one in. It is due at once, and so is what waits before it in its lane; the schedule begins
    /// anew.
    pub fn push(&mut self, delivery: Delivery, now: Duration) {
        let notice = &delivery.notice.id;
        let found = self.lanes.iter().position(|l| l.notice == *notice);
        let at = found.unwrap_or_else(|| {
            self.lanes.push(Lane {
                notice: notice.clone(),
                queue: Queue::default(),
                failures: 0,
                due: now,
                is_out: false,
            });
            self.lanes.len() - 1
        });
        let lane = &mut self.lanes[at];
        lane.queue.push(delivery);
        lane.failures = 0;
        lane.due = lane.due.min(now);
    }

    /// When the next one is due.
    pub fn next(&self, now: Duration) -> Next {
        let due = self.lanes.iter().map(|l| l.due.max(self.quiet_until)).min();
        match due {
            None => Next::Never,
            Some(_) if self.is_closed => Next::Never,
            Some(due) if due <= now => Next::Now,
            Some(due) => Next::In(due - now),
        }
    }

    /// How many lanes are due.
    pub fn due(&self, now: Duration) -> usize {
        self.lanes.iter().filter(|l| l.due <= now).count()
    }

    /// The delivery that has been due for longest; it is out from here on.
    pub fn take_one(&mut self) -> Option<Letter> {
        let lane = self.lanes.iter_mut().min_by_key(|l| l.due)?;
        lane.is_out = true;
        lane.queue.send_head().cloned().map(Letter::notice)
    }

    /// Everything in the lanes that are due, in one letter; it is out from here on.
    pub fn take_all(&mut self, now: Duration) -> Option<Letter> {
        let mut all = Vec::new();
        for lane in self.lanes.iter_mut().filter(|l| l.due <= now) {
            lane.is_out = true;
            all.extend(lane.queue.send_all().cloned());
        }
        Letter::digest(all)
    }

    /// What is out has arrived: the numbers that are done with. The other side is there, so whatever
    /// else waits for it is due.
    pub fn confirmed(&mut self, now: Duration) -> Vec<u64> {
        let mut done = Vec::new();
        for lane in &mut self.lanes {
            if std::mem::take(&mut lane.is_out) {
                done.extend(lane.queue.confirmed());
            }
            lane.failures = 0;
            lane.due = lane.due.min(now);
        }
        self.lanes.retain(|l| l.queue.len() > 0);
        done
    }

    /// What is out has failed and waits for its turn; `chance` lies between 0 and 1.
    pub fn failed(&mut self, now: Duration, chance: f64) {
        for lane in self.lanes.iter_mut().filter(|l| l.is_out) {
            lane.is_out = false;
            lane.queue.lost();
            lane.failures += 1;
            lane.due = now + self.schedule.wait(lane.failures, chance);
        }
    }

    /// Nothing more is sent before `until`.
    pub fn be_quiet(&mut self, until: Duration) {
        self.quiet_until = self.quiet_until.max(until);
    }

    /// Nothing more is sent; what waits is kept.
    pub fn close(&mut self) {
        self.is_closed = true;
    }

    /// How many deliveries wait.
    pub fn len(&self) -> usize {
        self.lanes.iter().map(|l| l.queue.len()).sum()
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::notice::State;
    use crate::outlets::queue::tests::delivery;
    use crate::outlets::retry::WEBHOOK;

    fn s(seconds: u64) -> Duration {
        Duration::from_secs(seconds)
    }

    fn lanes_with(all: &[(u64, &str)]) -> Lanes {
        let mut lanes = Lanes::new(WEBHOOK);
        for (number, id) in all {
            lanes.push(delivery(*number, id, State::Unacknowledged), s(*number));
        }
        lanes
    }

    fn numbers(letter: Option<Letter>) -> Vec<u64> {
        letter
            .iter()
            .flat_map(Letter::all)
            .map(|d| d.number)
            .collect()
    }

    #[test]
    fn one_that_fails_keeps_no_other_waiting() {
        let mut lanes = lanes_with(&[(1, "a"), (2, "b")]);
        assert_eq!(numbers(lanes.take_one()), [1]);
        lanes.failed(s(3), 0.0);
        assert_eq!(lanes.next(s(3)), Next::Now);
        assert_eq!(numbers(lanes.take_one()), [2]);
        lanes.failed(s(4), 0.0);
        assert_eq!(lanes.next(s(4)), Next::In(s(4)));
        assert_eq!(numbers(lanes.take_one()), [1]);
        lanes.failed(s(8), 0.0);
        assert_eq!(lanes.next(s(8)), Next::In(s(1)));
        assert_eq!(lanes.len(), 2);
    }

    #[test]
    fn one_that_arrives_brings_all_others_at_once() {
        let mut lanes = lanes_with(&[(1, "a")]);
        for failure in 0..3 {
            lanes.take_one();
            lanes.failed(s(failure), 0.0);
        }
        lanes.push(delivery(9, "b", State::Unacknowledged), s(10));
        assert_eq!(numbers(lanes.take_one()), [9]);
        assert_eq!(lanes.confirmed(s(11)), [9]);
        assert_eq!(lanes.next(s(11)), Next::Now);
        assert_eq!(numbers(lanes.take_one()), [1]);
        assert_eq!(lanes.confirmed(s(12)), [1]);
        assert_eq!(lanes.next(s(12)), Next::Never);
    }

    #[test]
    fn news_of_a_notice_are_tried_at_once_in_their_order() {
        let mut lanes = lanes_with(&[(1, "a")]);
        lanes.take_one();
        lanes.failed(s(2), 0.0);
        lanes.push(delivery(3, "a", State::Acknowledged), s(3));
        assert_eq!(lanes.next(s(3)), Next::Now);
        assert_eq!(numbers(lanes.take_one()), [1]);
        lanes.failed(s(3), 0.0);
        assert_eq!(lanes.next(s(3)), Next::In(s(5)));
        assert_eq!(numbers(lanes.take_one()), [1]);
        assert_eq!(lanes.confirmed(s(8)), [1]);
        assert_eq!(numbers(lanes.take_one()), [3]);
    }

    #[test]
    fn a_digest_takes_what_is_due_and_comes_back_whole() {
        let mut lanes = lanes_with(&[(1, "a"), (2, "b")]);
        lanes.push(delivery(3, "a", State::Acknowledged), s(3));
        assert_eq!(lanes.due(s(3)), 2);
        assert_eq!(numbers(lanes.take_all(s(3))), [1, 2, 3]);
        lanes.push(delivery(4, "b", State::Acknowledged), s(4));
        lanes.failed(s(4), 0.0);
        assert_eq!(numbers(lanes.take_all(s(9))), [1, 2, 3, 4]);
        let mut done = lanes.confirmed(s(9));
        done.sort_unstable();
        assert_eq!(done, [1, 2, 3, 4]);
    }

    #[test]
    fn quiet_and_closed_lanes_wait_and_keep() {
        let mut lanes = lanes_with(&[(1, "a")]);
        lanes.be_quiet(s(100));
        lanes.be_quiet(s(50));
        lanes.push(delivery(2, "b", State::Unacknowledged), s(2));
        assert_eq!(lanes.next(s(2)), Next::In(s(98)));
        lanes.close();
        assert_eq!(lanes.next(s(200)), Next::Never);
        assert_eq!(lanes.len(), 2);
    }
}
