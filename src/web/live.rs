//! Live updates: a stream of server-sent events that says when a page's contents have changed.
//!
//! The event carries the snapshot's version only; the script then asks for the page again and swaps
//! what differs, so that there is one way in which a page is made. What must hold: at most one event
//! per beat (`pulse`); a stream for one bank is silent while that bank does not change; every stream ends
//! with the shutdown.

use std::convert::Infallible;
use std::sync::Arc;
use std::time::Duration;

use axum::extract::{Query, State};
use axum::response::sse::{Event, KeepAlive, Sse};
use serde::Deserialize;
use tokio::sync::watch;
use tokio_stream::Stream;
use tokio_util::sync::CancellationToken;

use crate::engine::{BankView, Condition, OutletView, Snapshot};

use super::site::App;

/// Proxies cut connections that say nothing for a minute.
pub const KEEP_ALIVE: Duration = Duration::from_secs(20);

/// What a page wants to hear about.
#[derive(Debug, Deserialize)]
pub struct Wanted {
    bank: Option<String>,
}

/// The stream.
pub async fn stream(
    State(app): State<App>,
    Query(wanted): Query<Wanted>,
) -> Sse<impl Stream<Item = Result<Event, Infallible>>> {
    let listener = Listener {
        seen: seen(&app.pulse.borrow(), wanted.bank.as_deref()),
        bank: wanted.bank,
        snapshot: app.pulse.clone(),
        shutdown: app.shutdown.clone(),
    };
    let (tell, told) = tokio::sync::mpsc::channel(1);
    tokio::spawn(listener.run(tell));
    Sse::new(tokio_stream::wrappers::ReceiverStream::new(told))
        .keep_alive(KeepAlive::new().interval(KEEP_ALIVE))
}

/// What a page is made from: of one bank, that bank and the trouble that every page shows; of the
/// plant, everything.
#[derive(Clone)]
enum Seen {
    Bank(Option<Arc<BankView>>, [Condition; 2], Vec<OutletView>),
    Plant(u64),
}

fn seen(snapshot: &Snapshot, bank: Option<&str>) -> Seen {
    let Some(name) = bank else {
        return Seen::Plant(snapshot.version);
    };
    let mut banks = snapshot.banks.iter();
    let found = banks.find(|b| &*b.bank.name == name).cloned();
    let parts = [snapshot.broker.clone(), snapshot.store.clone()];
    Seen::Bank(found, parts, outlets_in_trouble(snapshot))
}

/// What every page shows of the ways out.
fn outlets_in_trouble(snapshot: &Snapshot) -> Vec<OutletView> {
    let all = snapshot.outlets.iter();
    all.filter(|o| o.trouble.is_some()).cloned().collect()
}

fn same(a: &Seen, b: &Seen) -> bool {
    match (a, b) {
        (Seen::Plant(a), Seen::Plant(b)) => a == b,
        (Seen::Bank(a, parts_a, outbox_a), Seen::Bank(b, parts_b, outbox_b)) => {
            let same_bank = match (a, b) {
                (Some(a), Some(b)) => Arc::ptr_eq(a, b),
                (None, None) => true,
                _ => false,
            };
            same_bank && parts_a == parts_b && outbox_a == outbox_b
        }
        _ => false,
    }
}

struct Listener {
    seen: Seen,
    bank: Option<String>,
    snapshot: watch::Receiver<Arc<Snapshot>>,
    shutdown: CancellationToken,
}

impl Listener {
    /// Tells of changes until the viewer has gone, the engine has ended or the shutdown comes.
    async fn run(mut self, tell: tokio::sync::mpsc::Sender<Result<Event, Infallible>>) {
        loop {
            tokio::select! {
                () = self.shutdown.cancelled() => return,
                () = tell.closed() => return,
                changed = self.snapshot.changed() => if changed.is_err() { return },
            }
            let snapshot = self.snapshot.borrow_and_update().clone();
            let now = seen(&snapshot, self.bank.as_deref());
            if same(&self.seen, &now) {
                continue;
            }
            self.seen = now;
            let event = Event::default()
                .event("changed")
                .data(snapshot.version.to_string());
            if tell.send(Ok(event)).await.is_err() {
                return;
            }
        }
    }
}
