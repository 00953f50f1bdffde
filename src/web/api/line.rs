//! Line events of a bank: entering and reading them.

use axum::Json;
use axum::extract::rejection::{JsonRejection, QueryRejection};
use axum::extract::{Path, Query, State};
use axum::http::StatusCode;

use crate::model::US_PER_DAY;
use crate::web::line::submit;
use crate::web::problem::Problem;
use crate::web::site::{App, bank};
use crate::web::wire::{LineEntryBody, LineEventBody, List};

use super::banks::{TimesWanted, range};

/// Days that are given when no time is asked for.
const USUAL_DAYS: i64 = 30;

/// Line events, oldest first; the newest in the range.
#[utoipa::path(get, path = "/api/v1/banks/{bank}/events", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name"), TimesWanted),
    responses((status = 200, body = List<LineEventBody>), (status = 400, body = Problem),
        (status = 404, body = Problem), (status = 503, body = Problem),
        (status = "default", body = Problem)))]
pub async fn list(
    State(app): State<App>,
    Path(name): Path<String>,
    wanted: Result<Query<TimesWanted>, QueryRejection>,
) -> Result<Json<List<LineEventBody>>, Problem> {
    bank(&app.now(), &name)?;
    let (from, to, most) = range(&app, wanted, USUAL_DAYS * US_PER_DAY)?;
    let found = app
        .history(move |h| h.line_events(&name, from, to, most))
        .await?;
    Ok(Json(List::whole(found.iter().map(Into::into).collect())))
}

/// Enters a line event.
#[utoipa::path(post, path = "/api/v1/banks/{bank}/events", tag = "banks",
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
