//! `/api/v1`: the reading interface and the changes it takes.
//!
//! Owns paths, paging, filters, the choice between JSON and CSV, and entity tags. Deliberately absent:
//! the forms of answers (that is [`super::wire`]) and who may ask (that is [`super::access`]).

pub mod answers;
pub mod banks;
pub mod deeds;
pub mod explain;
pub mod form;
pub mod line;
pub mod looks;
pub mod notices;
pub mod plant;
pub mod stream;
mod times;
mod unchanged;

use axum::Router;
use axum::middleware::from_fn;
use axum::routing::{get, post};

use super::site::App;

/// The routes below `/api/v1`.
pub fn router() -> Router<App> {
    Router::new()
        .route("/banks", get(banks::list))
        .route("/banks/{bank}", get(banks::one))
        .route("/banks/{bank}/sources", get(banks::sources))
        .route("/banks/{bank}/sources/{source}", get(banks::source))
        .route("/banks/{bank}/windows", get(banks::windows))
        .route("/banks/{bank}/looks", get(looks::list))
        .route("/banks/{bank}/looks/{span}", get(looks::one))
        .route("/banks/{bank}/explain", get(explain::bank_explained))
        .route("/banks/{bank}/refusals", get(banks::refusals))
        .route("/banks/{bank}/events", get(line::list).post(line::enter))
        .route("/refusals", get(plant::refusals))
        .route("/settings", get(plant::settings))
        .route("/health", get(plant::health))
        .route("/notices", get(notices::list))
        .route("/notices/{id}", get(notices::one))
        .route("/notices/{id}/evidence", get(explain::evidence))
        .layer(from_fn(unchanged::layer))
        .route("/stream", get(stream::stream))
        .route("/notices/{id}/acknowledge", post(deeds::acknowledge))
        .route("/notices/{id}/comment", post(deeds::comment))
        .route("/notices/{id}/shelve", post(deeds::shelve))
        .route("/notices/{id}/unshelve", post(deeds::unshelve))
        .route("/notices/{id}/out-of-service", post(deeds::out_of_service))
        .route("/notices/{id}/in-service", post(deeds::in_service))
}
