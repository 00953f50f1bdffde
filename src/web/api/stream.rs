//! `/api/v1/stream`: what changes, as server-sent events.
//!
//! Two kinds: `notice`, with the notice as it stands now, and `bank`, with the bank as in the list of
//! banks. What must hold: at most one of each per beat and bank; a program that has connected is told
//! the present first, so that it misses nothing between asking and listening.

use std::convert::Infallible;
use std::sync::Arc;

use axum::extract::rejection::QueryRejection;
use axum::extract::{Query, State};
use axum::response::sse::{Event, KeepAlive, Sse};
use serde::{Deserialize, Serialize};
use tokio::sync::mpsc;
use tokio_stream::Stream;
use utoipa::IntoParams;

use crate::engine::{BankView, Snapshot};
use crate::web::live::KEEP_ALIVE;
use crate::web::problem::Problem;
use crate::web::site::{App, bank};
use crate::web::standing::Standing;
use crate::web::wire::{BankBody, NoticeBody};

use super::answers::Faults;

/// Events waiting for a slow reader; who is slower still is told of the newest only.
const WAITING: usize = 64;

/// Which changes.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct Wanted {
    /// Of this bank only.
    bank: Option<String>,
}

/// Changes as server-sent events: `bank` and `notice`, each with the body that its address gives.
#[utoipa::path(get, operation_id = "follow_changes", path = "/api/v1/stream", tag = "stream", params(Wanted),
    responses((status = 200, description = "Events without an end.", body = String, content_type = "text/event-stream"), Faults))]
pub async fn stream(
    State(app): State<App>,
    wanted: Result<Query<Wanted>, QueryRejection>,
) -> Result<Sse<impl Stream<Item = Result<Event, Infallible>>>, Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    if let Some(name) = &wanted.bank {
        bank(&app.now(), name)?;
    }
    let (tell, told) = mpsc::channel(WAITING);
    tokio::spawn(run(app, wanted, tell));
    Ok(Sse::new(tokio_stream::wrappers::ReceiverStream::new(told))
        .keep_alive(KeepAlive::new().interval(KEEP_ALIVE)))
}

type Tell = mpsc::Sender<Result<Event, Infallible>>;

/// Tells of changes until the reader has gone, the engine has ended or the shutdown comes.
async fn run(app: App, wanted: Wanted, tell: Tell) {
    let mut pulse = app.pulse.clone();
    let mut before: Option<Arc<Snapshot>> = None;
    loop {
        let now = pulse.borrow_and_update().clone();
        for event in events(before.as_deref(), &now, wanted.bank.as_deref()) {
            if tell.send(Ok(event)).await.is_err() {
                return;
            }
        }
        before = Some(now);
        tokio::select! {
            () = app.shutdown.cancelled() => return,
            () = tell.closed() => return,
            changed = pulse.changed() => if changed.is_err() { return },
        }
    }
}

fn events(before: Option<&Snapshot>, now: &Snapshot, only: Option<&str>) -> Vec<Event> {
    let banks = now.banks.iter();
    let wanted = banks.filter(|b| only.is_none_or(|only| only == &*b.bank.name));
    let mut all = Vec::new();
    for view in wanted {
        let old = before.and_then(|s| s.banks.iter().find(|b| b.bank.name == view.bank.name));
        if old.is_some_and(|old| Arc::ptr_eq(old, view)) {
            continue;
        }
        all.extend(notices(old.map(AsRef::as_ref), view));
        let body = BankBody::new(view, Standing::of(view).key());
        all.extend(event("bank", &body));
    }
    all
}

/// The open notices that are new or changed.
fn notices(old: Option<&BankView>, view: &BankView) -> Vec<Event> {
    let known = |n: &Arc<crate::notice::Notice>| {
        old.is_some_and(|o| o.open.iter().any(|k| Arc::ptr_eq(k, n) || **k == **n))
    };
    let changed = view.open.iter().filter(|n| !known(n));
    changed
        .filter_map(|n| event("notice", &NoticeBody::from(n.as_ref())))
        .collect()
}

fn event(kind: &str, body: &impl Serialize) -> Option<Event> {
    Event::default().event(kind).json_data(body).ok()
}
