//! What belongs to the plant as a whole: settings, health, refusals of no bank.

use axum::extract::rejection::QueryRejection;
use axum::extract::{Query, State};
use axum::http::{HeaderMap, Uri};
use axum::response::Response;
use axum::{Json, response::IntoResponse as _};

use crate::web::health;
use crate::web::problem::Problem;
use crate::web::site::App;
use crate::web::wire::{HealthBody, List, RefusalBody, SettingBody};

use super::answers::Usual;
use super::form::{OnlyForm, Wish};

/// The settings as used, each with where it came from. Secrets stand in files; only the files' names
/// are settings.
#[utoipa::path(get, operation_id = "list_settings", path = "/api/v1/settings", tag = "plant", params(OnlyForm),
    responses((status = 200, description = "As JSON or as CSV.", content((List<SettingBody> = "application/json"), (String = "text/csv"))), Usual))]
pub async fn settings(
    State(app): State<App>,
    wanted: Result<Query<OnlyForm>, QueryRejection>,
    headers: HeaderMap,
    uri: Uri,
) -> Result<Response, Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let items: Vec<SettingBody> = app
        .site
        .settings
        .list()
        .into_iter()
        .map(Into::into)
        .collect();
    Wish::new(wanted.form, &headers, uri).answer(List::whole(items))
}

/// How store, broker and outlets are. Always 200; `/health/ready` has a status for supervisors.
#[utoipa::path(get, operation_id = "get_health", path = "/api/v1/health", tag = "plant",
    responses((status = 200, description = "As it is now.", body = HealthBody), Usual))]
pub async fn health(State(app): State<App>) -> Response {
    let snapshot = app.now();
    let trouble = health::trouble(&snapshot);
    Json(HealthBody::new(&snapshot, trouble)).into_response()
}

/// Arrivals that belong to no bank, the last of each kind.
#[utoipa::path(get, operation_id = "list_refusals", path = "/api/v1/refusals", tag = "refusals", params(OnlyForm),
    responses((status = 200, description = "As JSON or as CSV.", content((List<RefusalBody> = "application/json"), (String = "text/csv"))), Usual))]
pub async fn refusals(
    State(app): State<App>,
    wanted: Result<Query<OnlyForm>, QueryRejection>,
    headers: HeaderMap,
    uri: Uri,
) -> Result<Response, Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let items: Vec<RefusalBody> = app.now().refusals.iter().map(Into::into).collect();
    Wish::new(wanted.form, &headers, uri).answer(List::whole(items))
}
