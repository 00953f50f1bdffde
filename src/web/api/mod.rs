//! `/api/v1`: the reading interface and the changes it takes.
//!
//! Owns paths, paging and the checking of queries. Deliberately absent: the forms of answers (that is
//! [`super::wire`]) and who may ask (that is [`super::access`]).

pub mod banks;
pub mod line;
pub mod notices;

use axum::Router;
use axum::routing::{get, post};

use super::site::App;

/// The routes below `/api/v1`.
pub fn router() -> Router<App> {
    Router::new()
        .route("/banks", get(banks::list))
        .route("/banks/{bank}", get(banks::one))
        .route("/banks/{bank}/windows", get(banks::windows))
        .route("/banks/{bank}/looks", get(banks::looks))
        .route("/banks/{bank}/refusals", get(banks::refusals))
        .route("/banks/{bank}/events", get(line::list).post(line::enter))
        .route("/notices", get(notices::list))
        .route("/notices/{id}", get(notices::one))
        .route("/notices/{id}/acknowledge", post(notices::acknowledge))
}
