//! How much may be sent: at most so many in any stretch of time.
//!
//! Half of them may go at once and the others are spread evenly, so that what is held back waits for a
//! fraction of the stretch and not for its end. The rule is that of a virtual schedule (the generic
//! cell rate algorithm, ITU-T I.371): one more is in order when it is not earlier than its turn by more
//! than the burst allows. With a burst of b and an interval of T/r, any half-open stretch T holds fewer
//! than r + b, so b + r = N + 1 keeps it at N.

use std::time::Duration;

use crate::settings::AtMost;

/// Counts what was sent. Times are those since a start that the caller keeps.
#[derive(Clone, Debug)]
pub struct Pace {
    limit: Option<Limit>,
}

#[derive(Clone, Debug)]
struct Limit {
    interval: Duration,
    /// How much earlier than its turn one more may be.
    ahead: Duration,
    /// The turn of the next.
    turn: Duration,
}

impl Pace {
    /// With this limit, or without one.
    pub fn new(at_most: Option<AtMost>) -> Self {
        let limit = at_most.map(|AtMost { count, per }| {
            let burst = count.div_ceil(2).max(1);
            let spread = (count + 1 - burst).max(1);
            // Rounded up, so that the stretch never holds one more.
            let interval = per / spread + Duration::from_nanos(1);
            Limit {
                interval,
                ahead: interval * (burst - 1),
                turn: Duration::ZERO,
            }
        });
        Self { limit }
    }

    /// How long to wait before one more may be sent; `None` when it may be now.
    pub fn wait(&self, now: Duration) -> Option<Duration> {
        let limit = self.limit.as_ref()?;
        let earliest = limit.turn.saturating_sub(limit.ahead);
        earliest.checked_sub(now).filter(|wait| !wait.is_zero())
    }

    /// One was sent.
    pub fn sent(&mut self, now: Duration) {
        if let Some(limit) = &mut self.limit {
            limit.turn = limit.turn.max(now) + limit.interval;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const S: Duration = Duration::from_secs(1);

    fn pace(count: u32, per_s: u32) -> Pace {
        Pace::new(Some(AtMost {
            count,
            per: S * per_s,
        }))
    }

    /// When each of `wanted` that want to go as soon as they may goes.
    fn gone(pace: &mut Pace, wanted: usize, from: Duration) -> Vec<Duration> {
        let mut now = from;
        let mut times = Vec::new();
        for _ in 0..wanted {
            now += pace.wait(now).unwrap_or_default();
            pace.sent(now);
            times.push(now);
        }
        times
    }

    #[test]
    fn half_goes_at_once_and_the_rest_evenly() {
        let times = gone(&mut pace(12, 3600), 8, S);
        assert!(times[..6].iter().all(|t| *t == S), "{times:?}");
        for (one, next) in times[5..].iter().zip(&times[6..]) {
            let apart = (*next - *one).as_secs_f64();
            assert!((apart - 3600.0 / 7.0).abs() < 1.0, "{apart}");
        }
        assert_eq!(gone(&mut pace(1, 60), 2, S)[1].as_secs(), 61);
    }

    #[test]
    fn without_a_limit_nothing_waits() {
        let mut free = Pace::new(None);
        assert_eq!(gone(&mut free, 1000, S)[999], S);
    }

    proptest::proptest! {
        #[test]
        fn no_stretch_holds_more_than_allowed(
            count in 1_u32..40,
            per_s in 60_u32..4000,
            pauses in proptest::collection::vec(0_u64..400, 1..150)
        ) {
            let mut pace = pace(count, per_s);
            let (mut now, mut times) = (Duration::ZERO, Vec::new());
            for pause in pauses {
                now += Duration::from_secs(pause);
                now += pace.wait(now).unwrap_or_default();
                pace.sent(now);
                times.push(now);
            }
            for (i, from) in times.iter().enumerate() {
                let within = times[i..].iter().filter(|t| **t < *from + S * per_s).count();
                proptest::prop_assert!(within <= count as usize, "{} in {:?}", within, times);
            }
        }
    }
}
