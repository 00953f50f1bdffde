//! Banks, their windows, looks and refusals.

use axum::Json;
use axum::extract::rejection::QueryRejection;
use axum::extract::{Path, Query, State};
use serde::Deserialize;
use utoipa::IntoParams;

use crate::engine::{Command, Outcome};
use crate::model::{Time, US_PER_DAY};
use crate::verdict::Digest;
use crate::web::problem::Problem;
use crate::web::site::{App, bank};
use crate::web::standing::Standing;
use crate::web::wire::{BankBody, BankWholeBody, DigestBody, List, RefusalBody, WindowBody};

/// Looks of a day at the default settings are 11 520; a part holds a tenth of them.
const MOST_LOOKS: usize = 1000;

/// All banks.
#[utoipa::path(get, path = "/api/v1/banks", tag = "banks",
    responses((status = 200, body = List<BankBody>), (status = "default", body = Problem)))]
pub async fn list(State(app): State<App>) -> Json<List<BankBody>> {
    let snapshot = app.now();
    let banks = snapshot.banks.iter();
    let bodies = banks.map(|b| BankBody::new(b, Standing::of(b).key()));
    Json(List::whole(bodies.collect()))
}

/// One bank with its sources, newest looks and open notices.
#[utoipa::path(get, path = "/api/v1/banks/{bank}", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name")),
    responses((status = 200, body = BankWholeBody), (status = 404, body = Problem),
        (status = "default", body = Problem)))]
pub async fn one(
    State(app): State<App>,
    Path(name): Path<String>,
) -> Result<Json<BankWholeBody>, Problem> {
    let snapshot = app.now();
    let (_, view) = bank(&snapshot, &name)?;
    Ok(Json(BankWholeBody::new(view, Standing::of(view).key())))
}

/// The values in the bank's windows, as the store and the engine hold them.
#[utoipa::path(get, path = "/api/v1/banks/{bank}/windows", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name")),
    responses((status = 200, body = List<WindowBody>), (status = 404, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn windows(
    State(app): State<App>,
    Path(name): Path<String>,
) -> Result<Json<List<WindowBody>>, Problem> {
    let (ix, _) = bank(&app.now(), &name).map(|(ix, b)| (ix, b.clone()))?;
    match app
        .ask("interface".into(), Command::Windows { bank: ix })
        .await?
    {
        Outcome::Windows(windows) => Ok(Json(List::whole(
            windows.into_iter().map(Into::into).collect(),
        ))),
        Outcome::NotFound(why) => Err(Problem::not_found(&why)),
        Outcome::Refused(why) => Err(Problem::unavailable(&why)),
        Outcome::Acknowledged(_) | Outcome::Line(_) => {
            Err(Problem::internal("the answer was to another question"))
        }
    }
}

/// Which times.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct TimesWanted {
    /// At or after this time (RFC 3339); a day before `to` for looks, thirty for line events, when it is
    /// missing.
    from: Option<String>,
    /// Before this time (RFC 3339); now when it is missing.
    to: Option<String>,
    /// At most so many, 1 to 1000; 1000 when it is missing. The newest in the range are given.
    most: Option<usize>,
}

/// Short forms of past looks, oldest first. `next`, when there is one, is the `to` that gives those
/// before.
#[utoipa::path(get, path = "/api/v1/banks/{bank}/looks", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name"), TimesWanted),
    responses((status = 200, body = List<DigestBody>), (status = 400, body = Problem),
        (status = 404, body = Problem), (status = 503, body = Problem),
        (status = "default", body = Problem)))]
pub async fn looks(
    State(app): State<App>,
    Path(name): Path<String>,
    wanted: Result<Query<TimesWanted>, QueryRejection>,
) -> Result<Json<List<DigestBody>>, Problem> {
    bank(&app.now(), &name)?;
    let (from, to, most) = range(&app, wanted, US_PER_DAY)?;
    let found = app
        .history(move |h| h.digests(&name, from, to, most))
        .await?;
    let (found, next) = whole_moments(found, most);
    let items = found.into_iter().map(Into::into).collect();
    Ok(Json(List { items, next }))
}

/// From, to and the most of what is asked for; `usual_us` back from `to` when `from` is missing.
///
/// # Errors
/// 400 for what cannot be read.
pub fn range(
    app: &App,
    wanted: Result<Query<TimesWanted>, QueryRejection>,
    usual_us: i64,
) -> Result<(Time, Time, usize), Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let to = time("to", wanted.to)?.unwrap_or_else(|| app.site.clock.now().plus_us(1));
    let from = time("from", wanted.from)?.unwrap_or_else(|| to.plus_us(-usual_us));
    let most = wanted.most.unwrap_or(MOST_LOOKS);
    if (1..=MOST_LOOKS).contains(&most) {
        Ok((from, to, most))
    } else {
        Err(Problem::bad_request(
            "`most` must be a whole number from 1 to 1000",
        ))
    }
}

/// A full part may begin in the middle of one moment's looks: leaves those to the next part, whose
/// `to` is the first moment kept.
fn whole_moments(mut found: Vec<Digest>, most: usize) -> (Vec<Digest>, Option<String>) {
    let Some(first) = found.first().map(|d| d.at).filter(|_| found.len() >= most) else {
        return (found, None);
    };
    if found.last().is_some_and(|d| d.at > first) {
        found.retain(|d| d.at > first);
    }
    let next = found.first().map(|d| d.at.to_string());
    (found, next)
}

/// Refusals by reason, the last of each kind.
#[utoipa::path(get, path = "/api/v1/banks/{bank}/refusals", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name")),
    responses((status = 200, body = List<RefusalBody>), (status = 404, body = Problem),
        (status = "default", body = Problem)))]
pub async fn refusals(
    State(app): State<App>,
    Path(name): Path<String>,
) -> Result<Json<List<RefusalBody>>, Problem> {
    let snapshot = app.now();
    let (_, view) = bank(&snapshot, &name)?;
    let items = view.refusals.iter().map(Into::into).collect();
    Ok(Json(List::whole(items)))
}

fn time(key: &str, text: Option<String>) -> Result<Option<Time>, Problem> {
    let parse = |text: String| {
        Time::parse_rfc3339(&text).map_err(|why| {
            Problem::bad_request(&format!(
                "`{key}` must be a time like 2026-07-03T14:00:00Z (a + is written %2B): {why}"
            ))
        })
    };
    text.map(parse).transpose()
}
