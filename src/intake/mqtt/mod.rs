//! The connection that listens: MQTT 5 and 3.1.1, QoS 1, a persistent session, acknowledgements only
//! for what is durable.
//!
//! | part | what it is for |
//! | --- | --- |
//! | `listener` | the task: connect, subscribe, hand on, acknowledge, retry |
//! | `edge` | the same for Sparkplug's edge nodes, on a connection of its own |
//! | `merge` | both as one for whoever takes the measurements |
//! | [`overhear`] | listens for a while without leaving a trace, for `evenrow vet --broker` |
//! | `link` | both versions of the protocol in one set of words |
//! | `ledger` | what is in flight; redeliveries told from fresh messages |
//! | `queue` | arrivals that wait for the engine, bounded |
//! | `drops` | the broker's own count of messages that it dropped |
//!
//! What must hold:
//! - The task that polls the connection waits for nothing else while the queue has room, so that
//!   keep-alive goes on while the store stands still; the queue has four times the room of what the
//!   broker may send unacknowledged. A broker that sends still more is not read any further and waits.
//! - A message is acknowledged once, after its receipt came back, on the connection on which the
//!   broker last delivered it.
//! - Subscribing happens on every connection, whatever the broker says it remembers.
//! - Each change of condition is said once, to the engine and in the log.
//!
//! Deliberately absent: publishing and the last will (another connection does that; the request for
//! a Sparkplug node's birth is the one thing that is published here), and any judgement on what was measured.

mod drops;
mod edge;
mod ledger;
mod link;
mod listener;
mod merge;
mod overhear;
mod queue;

use std::sync::Arc;

use tokio::sync::mpsc;
use tokio_util::sync::CancellationToken;

use crate::engine::Condition;
use crate::settings::{PayloadForm, Settings};

use super::nodes::Nodes;

pub use super::arrival::{Arrival, Receipt};
pub use overhear::{Overheard, overhear};

/// How many messages wait between a connection and the merging of two; the connection's own queue
/// does the waiting.
const BETWEEN: usize = 1;

/// What comes from the broker.
#[derive(Clone, Debug, PartialEq)]
pub enum FromBroker {
    /// One message. Its receipt goes back when all of it is durable or counted.
    Arrival(Arrival),
    /// The connection works, or what is wrong with it.
    Condition(Condition),
}

/// Why listening ended although nobody asked for it.
#[derive(Debug, thiserror::Error)]
pub enum IntakeError {
    /// The receiver of the feed is gone.
    #[error("nobody takes the measurements any more")]
    NobodyTakes,
}

/// Listens until `shutdown`, then acknowledges what still becomes durable (until `receipts` is closed,
/// at most a second), says farewell and ends. Trouble with the broker is told through `feed` and
/// retried, whatever it is.
///
/// `already` holds [`Receipt::pair`]s that were durable when the last process ended and may not have
/// been acknowledged: their redelivery is refused as [`crate::model::Reason::Redelivered`].
///
/// # Errors
/// [`IntakeError`] when the feed's receiver is gone.
pub async fn run(
    settings: Arc<Settings>,
    already: Vec<(u16, u64)>,
    feed: mpsc::Sender<FromBroker>,
    receipts: mpsc::Receiver<Vec<Receipt>>,
    shutdown: CancellationToken,
) -> Result<(), IntakeError> {
    let most_bytes = settings.broker.most_bytes;
    let plain = settings
        .feeds
        .iter()
        .any(|feed| !matches!(feed.payload, PayloadForm::Sparkplug(_)));
    let Some(nodes) = Nodes::new(&settings.feeds, most_bytes) else {
        return listener::Listener::new(settings, already, feed, receipts, shutdown)
            .run()
            .await;
    };
    if !plain {
        let edge = edge::Edge::new(settings, nodes, feed, shutdown);
        let (ended, ()) = tokio::join!(edge.run(), merge::let_go(receipts));
        return ended;
    }
    let (to_merge, from_listener) = mpsc::channel(BETWEEN);
    let (to_merge_too, from_edge) = mpsc::channel(BETWEEN);
    let edge = edge::Edge::new(settings.clone(), nodes, to_merge_too, shutdown.clone());
    let listener = listener::Listener::new(settings, already, to_merge, receipts, shutdown);
    let merged = merge::merge(from_listener, from_edge, feed);
    let (one, other, ()) = tokio::join!(listener.run(), edge.run(), merged);
    one.and(other)
}
