//! An invented filler with eight heads that wander together: what a real line does all day.

use std::time::{SystemTime, UNIX_EPOCH};

use crate::common::mosquitto::Mosquitto;

/// The topic on which the whole filler publishes.
pub const TOPIC: &str = "quayside/filler2/net";

/// How many heads it has.
pub const HEADS: usize = 8;

/// A line that knows its next cycle.
pub struct Line {
    cycle: i64,
    first_ms: u64,
    state: u64,
    common: f64,
}

/// How a head is off.
#[derive(Clone, Copy)]
pub struct Off {
    /// Which head, from 1.
    pub head: usize,
    /// How much it gives too much, in grams.
    pub by: f64,
}

impl Line {
    /// A line whose first cycle was taken a quarter of an hour ago, one cycle in half a second.
    pub fn new() -> Self {
        let now = SystemTime::now()
            .duration_since(UNIX_EPOCH)
            .expect("it is later than 1970");
        Self {
            cycle: 0,
            first_ms: now.as_millis() as u64 - 900_000,
            state: 0x2545_F491_4F6C_DD1D,
            common: 0.0,
        }
    }

    /// The number of the newest cycle.
    pub fn newest(&self) -> i64 {
        self.cycle
    }

    /// The messages of the next cycles, one head each.
    pub fn cycles(&mut self, count: usize, off: &[Off]) -> Vec<String> {
        let mut messages = Vec::with_capacity(count * HEADS);
        for _ in 0..count {
            self.cycle += 1;
            self.common = 0.95 * self.common + 0.5 * self.normal();
            for head in 1..=HEADS {
                let off: f64 = off.iter().filter(|o| o.head == head).map(|o| o.by).sum();
                let value = 503.0 + self.common + off + 0.4 * self.normal();
                messages.push(self.message(head, value));
            }
        }
        messages
    }

    /// Publishes the next cycles.
    pub fn publish(&mut self, broker: &Mosquitto, count: usize, off: &[Off]) {
        broker.publish_lines(TOPIC, &self.cycles(count, off));
    }

    /// When the newest cycle was taken, in milliseconds since 1970.
    fn taken_ms(&self) -> u64 {
        self.first_ms + 500 * self.cycle as u64
    }

    fn message(&self, head: usize, value: f64) -> String {
        let (ts, n) = (self.taken_ms(), self.cycle);
        format!(r#"{{"head":"{head:02}","v":{value:.1},"ts":{ts},"n":{n}}}"#)
    }

    /// Twelve uniform numbers less six: close enough to normal for a filler, and the same each time.
    fn normal(&mut self) -> f64 {
        (0..12).map(|_| self.uniform()).sum::<f64>() - 6.0
    }

    /// Marsaglia's xorshift generator of 64 bits (Journal of Statistical Software 8(14), 2003).
    fn uniform(&mut self) -> f64 {
        self.state ^= self.state << 13;
        self.state ^= self.state >> 7;
        self.state ^= self.state << 17;
        (self.state >> 11) as f64 / (1_u64 << 53) as f64
    }
}
