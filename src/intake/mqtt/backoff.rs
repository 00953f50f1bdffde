//! How long to wait before the next attempt to connect.
//!
//! Doubling from 2 s to 60 s, a random moment in the upper half of each: the clients of a broker
//! that comes back do not all return at once, and nobody hammers one that refuses them.

use std::time::Duration;

const SHORTEST_S: u32 = 2;
const LONGEST_S: u32 = 60;

/// Counts failures in a row.
#[derive(Debug, Default)]
pub(super) struct Backoff {
    failures: u32,
}

impl Backoff {
    /// The wait before the next attempt.
    pub(super) fn next(&mut self) -> Duration {
        let doubled =
            SHORTEST_S.saturating_mul(1_u32.checked_shl(self.failures).unwrap_or(u32::MAX));
        self.failures = (self.failures + 1).min(16);
        let whole = f64::from(doubled.min(LONGEST_S));
        Duration::from_secs_f64(whole * (0.5 + 0.5 * fastrand::f64()))
    }

    /// A connection was stable: begin anew.
    pub(super) fn reset(&mut self) {
        self.failures = 0;
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn waits_grow_from_one_second_to_a_minute() {
        let mut backoff = Backoff::default();
        let expected = [
            (1, 2),
            (2, 4),
            (4, 8),
            (8, 16),
            (16, 32),
            (30, 60),
            (30, 60),
        ];
        for round in 0..2 {
            for (low, high) in expected {
                let wait = backoff.next();
                let range = Duration::from_secs(low)..=Duration::from_secs(high);
                assert!(
                    range.contains(&wait),
                    "round {round}: {wait:?} in {range:?}"
                );
            }
            for _ in 0..100 {
                assert!(backoff.next() <= Duration::from_secs(60));
            }
            backoff.reset();
        }
    }
}
