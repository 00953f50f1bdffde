//! Line events of a bank: entering and reading them.

use axum::Json;
use axum::extract::rejection::{JsonRejection, QueryRejection};
use axum::extract::{Path, Query, State};
use axum::http::{HeaderMap, StatusCode, Uri};
use axum::response::Response;
use serde::Deserialize;
use utoipa::IntoParams;

use crate::model::US_PER_DAY;
use crate::web::line::submit;
use crate::web::problem::Problem;
use crate::web::site::{App, bank};
use crate::web::wire::{LineEntryBody, LineEventBody, List};

use super::answers::Usual;
use super::form::{Form, Wish};
use super::times;

/// Days that are given when no time is asked for.
const USUAL_DAYS: i64 = 30;

/// Line events given at once.
const MOST: usize = 1000;

/// Which line events.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct LineWanted {
    /// At or after this time (RFC 3339); thirty days before `to` when it is missing.
    from: Option<String>,
    /// Before this time (RFC 3339); now when it is missing.
    to: Option<String>,
    /// At most so many, 1 to 1000; 1000 when it is missing. The newest in the range are given.
    most: Option<usize>,
    /// `csv` for comma-separated values; else what the Accept header says, else JSON.
    form: Option<Form>,
}

/// Line events, oldest first; the newest in the range.
#[utoipa::path(get, operation_id = "list_line_events", path = "/api/v1/banks/{bank}/events", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name"), LineWanted),
    responses((status = 200, content((List<LineEventBody> = "application/json"), (String = "text/csv"))), Usual))]
pub async fn list(
    State(app): State<App>,
    Path(name): Path<String>,
    wanted: Result<Query<LineWanted>, QueryRejection>,
    headers: HeaderMap,
    uri: Uri,
) -> Result<Response, Problem> {
    bank(&app.now(), &name)?;
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let to = times::read("to", wanted.to)?.unwrap_or_else(|| app.site.clock.now().plus_us(1));
    let usual = || to.plus_us(-USUAL_DAYS * US_PER_DAY);
    let from = times::read("from", wanted.from)?.unwrap_or_else(usual);
    let most = times::most(wanted.most, MOST, MOST)?;
    let found = app
        .history(move |h| h.line_events(&name, from, to, most))
        .await?;
    let items: Vec<LineEventBody> = found.iter().map(Into::into).collect();
    Wish::new(wanted.form, &headers, uri).answer(List::whole(items))
}

/// Enters a line event.
#[utoipa::path(post, operation_id = "enter_line_event", path = "/api/v1/banks/{bank}/events", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name")),
    request_body = LineEntryBody, security(("token" = [])),
    responses((status = 201, body = LineEventBody), (status = 400, body = Problem),
        (status = 401, body = Problem), (status = 403, body = Problem),
        (status = 404, body = Problem), (status = 409, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn enter(
    State(app): State<App>,
    Path(name): Path<String>,
    entry: Result<Json<LineEntryBody>, JsonRejection>,
) -> Result<(StatusCode, Json<LineEventBody>), Problem> {
    let Json(entry) = entry.map_err(|e| Problem::new(e.status(), &e.body_text()))?;
    let event = submit(&app, &name, &entry).await?;
    Ok((StatusCode::CREATED, Json((&event).into())))
}
