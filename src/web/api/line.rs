//! Line events of a bank: entering and reading them.

use axum::Json;
use axum::extract::rejection::{JsonRejection, QueryRejection};
use axum::extract::{Path, Query, State};
use axum::http::StatusCode;

use crate::engine::{Command, Outcome};
use crate::model::{LineEvent, US_PER_DAY};
use crate::web::problem::Problem;
use crate::web::site::{App, bank};
use crate::web::wire::{LineEntryBody, LineEventBody, List};

use super::banks::{TimesWanted, range};
use super::notices::{comment, person};

/// Days that are given when no time is asked for.
const USUAL_DAYS: i64 = 30;

/// A product code or source name on a form.
const LONGEST_WORD: usize = 120;

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

/// Checks and sends a line event, for the interface and the pages.
///
/// # Errors
/// 400 for what is missing or too long, else what the engine says.
pub async fn submit(app: &App, name: &str, entry: &LineEntryBody) -> Result<LineEvent, Problem> {
    let (ix, _) = bank(&app.now(), name).map(|(ix, b)| (ix, b.clone()))?;
    let by = person(&entry.by)?;
    let reason = comment(&entry.reason)?;
    let words = [&entry.source, &entry.product];
    let too_long = |w: &&Option<String>| {
        w.as_ref()
            .is_some_and(|w| w.chars().count() > LONGEST_WORD || w.chars().any(char::is_control))
    };
    if words.iter().any(|w| too_long(w)) {
        return Err(Problem::bad_request(
            "a source or product has at most 120 characters on one line",
        ));
    }
    let change = entry.change().map_err(|why| Problem::bad_request(&why))?;
    let what = Command::Line {
        bank: ix,
        change,
        reason: reason.to_owned(),
    };
    match app.ask(by.into(), what).await? {
        Outcome::Line(event) => Ok(event),
        Outcome::NotFound(why) => Err(Problem::not_found(&why)),
        Outcome::Refused(why) => Err(Problem::conflict(&why)),
        Outcome::Acknowledged(_) | Outcome::Windows(_) => {
            Err(Problem::internal("the answer was to another question"))
        }
    }
}
