//! The simulated line: publishes every head's weight of every cycle over the broker, like any client.
//!
//! The line has been running for half an hour when it is first heard: cycles that were due before now
//! are published at once with their own times, and from then on each when it is due. Deliberately
//! absent: what is wrong with a head; that is the filler's, and it may be exchanged while the line runs.

use std::sync::Arc;
use std::time::Duration;

use rumqttc::{AsyncClient, ClientError, MqttOptions, QoS};
use serde::Serialize;
use tokio::sync::watch;
use tokio_util::sync::CancellationToken;

use crate::clock::Clock;
use crate::model::Time;

use super::filler::{Filler, Weight};
use super::story::head_name;

/// Messages between the line and its connection; a full channel makes the line wait.
const QUEUE: usize = 256;
/// Keep-alive; any will do on the loopback address.
const KEEP_ALIVE: Duration = Duration::from_secs(30);
/// Cycle numbers start at the first cycle's time in steps of this, which no speed outruns: so a later
/// run on the same store goes on above an earlier one.
const NUMBER_STEP_US: i64 = 25_000;

/// When each cycle is.
#[derive(Clone, Copy, Debug)]
pub struct Schedule {
    /// When cycle 0 was.
    pub first: Time,
    /// From one cycle to the next.
    pub cycle_us: i64,
}

impl Schedule {
    /// Cycles that go no faster than this keep their numbers rising from run to run.
    pub const SHORTEST_CYCLE_US: i64 = NUMBER_STEP_US;

    /// A line that has been running for `cycles` cycles.
    pub fn running_for(cycles: u64, cycle_us: i64, now: Time) -> Self {
        let since = cycle_us.saturating_mul(cycles as i64);
        Self {
            first: now.plus_us(-since),
            cycle_us,
        }
    }

    /// When a cycle is due.
    pub fn due(&self, cycle: u64) -> Time {
        self.first
            .plus_us(self.cycle_us.saturating_mul(cycle as i64))
    }

    /// The first cycle that is not over at `now`.
    pub fn next_cycle(&self, now: Time) -> u64 {
        let since = now.us_since(self.first).max(0);
        since as u64 / self.cycle_us.max(1) as u64 + 1
    }

    /// The number that the machine gives a cycle.
    fn number(&self, cycle: u64) -> i64 {
        (self.first.us() / NUMBER_STEP_US).saturating_add(cycle as i64)
    }
}

/// One message, as a machine's gateway writes it.
#[derive(Serialize)]
struct Message {
    v: Grams,
    ts: Time,
    n: i64,
}

/// Writes the weight as the number the checkweigher shows.
struct Grams(Weight);

impl Serialize for Grams {
    fn serialize<S: serde::Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        // The shortest text of this double is the checkweigher's, to the tenth.
        serializer.serialize_f64(self.0.grams())
    }
}

/// Why the line stopped.
#[derive(Debug, thiserror::Error)]
pub enum LineError {
    /// A message could not be written.
    #[error("the line could not write a message: {0}")]
    Write(#[from] serde_json::Error),
    /// The connection is gone.
    #[error("the line lost its connection to the demo's broker: {0}")]
    Publish(#[from] ClientError),
}

/// Runs the line until it is told to stop.
///
/// # Errors
/// When the connection's task has ended.
pub async fn run(
    client: AsyncClient,
    schedule: Schedule,
    filler: watch::Receiver<Arc<Filler>>,
    clock: Clock,
    shutdown: CancellationToken,
) -> Result<(), LineError> {
    for cycle in 0_u64.. {
        let due = schedule.due(cycle);
        tokio::select! {
            () = shutdown.cancelled() => break,
            () = tokio::time::sleep(due.wait_from(clock.now())) => {}
        }
        let weights = filler.borrow().weigh(cycle);
        let publish = deliver(&client, schedule.number(cycle), due, &weights);
        tokio::select! {
            () = shutdown.cancelled() => break,
            result = publish => result?,
        }
    }
    Ok(())
}

/// Publishes one cycle.
async fn deliver(
    client: &AsyncClient,
    number: i64,
    taken: Time,
    weights: &[Weight],
) -> Result<(), LineError> {
    for (head, weight) in weights.iter().enumerate() {
        let topic = format!("quayside/filler2/head/{}/net", head_name(head));
        let message = Message {
            v: Grams(*weight),
            ts: taken,
            n: number,
        };
        let payload = serde_json::to_vec(&message)?;
        client
            .publish(topic, QoS::AtLeastOnce, false, payload)
            .await?;
    }
    Ok(())
}

/// A client of the demo's broker: its handle, and the task that keeps its connection going.
pub fn connect(id: &str, broker: std::net::SocketAddr) -> (AsyncClient, rumqttc::EventLoop) {
    let mut options = MqttOptions::new(id, broker.ip().to_string(), broker.port());
    options.set_keep_alive(KEEP_ALIVE);
    AsyncClient::new(options, QUEUE)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn half_an_hour_is_over_when_the_line_is_first_heard() {
        let now = Time::from_us(1_800_000_000_000_000);
        let schedule = Schedule::running_for(3_600, 500_000, now);
        assert_eq!(now.us_since(schedule.due(0)), 1_800_000_000);
        assert_eq!(schedule.due(3_600), now);
        assert_eq!(schedule.next_cycle(now), 3_601);
        assert_eq!(schedule.next_cycle(now.plus_us(499_999)), 3_601);
        assert_eq!(schedule.next_cycle(now.plus_us(500_000)), 3_602);
    }

    #[test]
    fn a_later_run_numbers_its_cycles_above_an_earlier_one() {
        let now = Time::from_us(1_800_000_000_000_000);
        for cycle_us in [Schedule::SHORTEST_CYCLE_US, 500_000, 5_000_000] {
            let first = Schedule::running_for(3_600, cycle_us, now);
            let last = first.next_cycle(now.plus_us(60_000_000));
            let again = Schedule {
                first: first.due(last + 1),
                cycle_us,
            };
            assert!(again.number(0) > first.number(last));
        }
    }

    #[test]
    fn messages_carry_the_value_to_the_digit_shown() {
        let filler = Filler::new(1);
        for weight in filler.weigh(5) {
            let message = Message {
                v: Grams(weight),
                ts: Time::from_us(1_750_000_000_500_000),
                n: 5,
            };
            let text = serde_json::to_string(&message).expect("text");
            assert_eq!(
                text,
                format!(r#"{{"v":{weight},"ts":"2025-06-15T15:06:40.5Z","n":5}}"#)
            );
        }
    }
}
