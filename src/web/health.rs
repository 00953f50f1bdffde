//! Health for supervisors; never needs a token.

use axum::Json;
use axum::extract::State;
use axum::response::{IntoResponse, Response};
use serde_json::json;

use crate::engine::{Condition, Snapshot};

use super::problem::Problem;
use super::site::App;

/// The process answers.
pub async fn live() -> Response {
    Json(json!({ "status": "live" })).into_response()
}

/// The store is recovered and every subscription confirmed.
pub async fn ready(State(app): State<App>) -> Response {
    match trouble(&app.now()) {
        None => Json(json!({ "status": "ready" })).into_response(),
        Some(why) => Problem::unavailable(&why).into_response(),
    }
}

/// What keeps us from being ready, store first.
pub fn trouble(snapshot: &Snapshot) -> Option<String> {
    let parts = [("store", &snapshot.store), ("broker", &snapshot.broker)];
    let said: Vec<String> = parts
        .into_iter()
        .filter_map(|(part, condition)| match condition {
            Condition::Well | Condition::Noted(_) => None,
            Condition::Starting => Some(format!("the {part} is still starting")),
            Condition::Trouble(why) => Some(format!("{part}: {why}")),
        })
        .collect();
    (!said.is_empty()).then(|| said.join("; "))
}
