//! When something that failed is tried again.

use std::time::Duration;

/// A minute.
const MIN: u64 = 60;
/// An hour.
const H: u64 = 3600;

/// The waits after the first, second, … failure; the last one holds for all later ones, since a
/// delivery is never given up.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Schedule(&'static [u64]);

/// The schedule that the Standard Webhooks specification proposes
/// (github.com/standard-webhooks/standard-webhooks, `spec/standard-webhooks.md`, "Deliverability and
/// reliability"), in seconds.
pub const WEBHOOK: Schedule = Schedule(&[
    5,
    5 * MIN,
    30 * MIN,
    2 * H,
    5 * H,
    10 * H,
    14 * H,
    20 * H,
    24 * H,
]);

/// For what belongs to the plant: a mail server or a program is mended by the same people, within the
/// shift (common practice, no source).
pub const OWN: Schedule = Schedule(&[5, 30, 2 * MIN, 5 * MIN, 15 * MIN, 30 * MIN]);

/// The waits are longer by up to this share at random, so that many senders do not come at once.
const JITTER: f64 = 0.1;

impl Schedule {
    /// The wait after so many failures in a row, at least one; `chance` lies between 0 and 1.
    pub fn wait(self, failures: usize, chance: f64) -> Duration {
        let last = self.0.len().saturating_sub(1);
        let at = failures.saturating_sub(1).min(last);
        let seconds = self.0.get(at).copied().unwrap_or(H);
        Duration::from_secs(seconds).mul_f64(1.0 + JITTER * chance)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn waits_grow_to_the_last_and_stay_there() {
        let hours = |schedule: Schedule, failures| {
            let [least, most] = [0.0, 1.0].map(|chance| schedule.wait(failures, chance));
            assert_eq!(most, least.mul_f64(1.1));
            least.as_secs_f64() / 3600.0
        };
        let all: Vec<f64> = (1..=11).map(|n| hours(WEBHOOK, n)).collect();
        assert_eq!(
            all[2..],
            [0.5, 2.0, 5.0, 10.0, 14.0, 20.0, 24.0, 24.0, 24.0]
        );
        assert_eq!(WEBHOOK.wait(1, 0.0).as_secs(), 5);
        assert_eq!(WEBHOOK.wait(2, 0.0).as_secs(), 300);
        assert_eq!(OWN.wait(1, 0.0).as_secs(), 5);
        assert_eq!(hours(OWN, 100), 0.5);
    }
}
