//! Banks, their sources, windows and refusals.

use axum::extract::rejection::QueryRejection;
use axum::extract::{Path, Query, State};
use axum::http::{HeaderMap, Uri};
use axum::response::Response;
use axum::{Json, response::IntoResponse as _};
use serde::Deserialize;
use utoipa::IntoParams;

use crate::engine::{Command, Outcome};
use crate::web::problem::Problem;
use crate::web::site::{App, bank};
use crate::web::standing::Standing;
use crate::web::wire::{BankBody, BankWholeBody, List, RefusalBody, SourceBody, WindowBody};

use super::answers::Usual;
use super::form::{Form, OnlyForm, Wish};

/// Which banks.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct BanksWanted {
    /// Only those that stand so, in the word of `standing`.
    standing: Option<String>,
    /// Only those of this machine.
    equipment: Option<String>,
    /// `csv` for comma-separated values; else what the Accept header says, else JSON.
    form: Option<Form>,
}

/// All banks.
#[utoipa::path(get, operation_id = "list_banks", path = "/api/v1/banks", tag = "banks", params(BanksWanted),
    responses((status = 200, description = "As JSON or as CSV.", content((List<BankBody> = "application/json"), (String = "text/csv"))), Usual))]
pub async fn list(
    State(app): State<App>,
    wanted: Result<Query<BanksWanted>, QueryRejection>,
    headers: HeaderMap,
    uri: Uri,
) -> Result<Response, Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let snapshot = app.now();
    let banks = snapshot.banks.iter();
    let bodies = banks.map(|b| BankBody::new(b, Standing::of(b).key()));
    let equipment = |b: &BankBody| {
        let asked = wanted.equipment.as_ref();
        asked.is_none_or(|e| b.equipment.as_ref() == Some(e))
    };
    let standing = |b: &BankBody| wanted.standing.as_ref().is_none_or(|s| b.standing == *s);
    let items = bodies.filter(|b| standing(b) && equipment(b)).collect();
    Wish::new(wanted.form, &headers, uri).answer(List::whole(items))
}

/// One bank with its sources, newest looks and open notices.
#[utoipa::path(get, operation_id = "get_bank", path = "/api/v1/banks/{bank}", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name")),
    responses((status = 200, description = "As it is now.", body = BankWholeBody), Usual))]
pub async fn one(State(app): State<App>, Path(name): Path<String>) -> Result<Response, Problem> {
    let snapshot = app.now();
    let (_, view) = bank(&snapshot, &name)?;
    Ok(Json(BankWholeBody::new(view, Standing::of(view).key())).into_response())
}

/// A bank's sources in physical order, with what stands for now.
#[utoipa::path(get, operation_id = "list_sources", path = "/api/v1/banks/{bank}/sources", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name"), OnlyForm),
    responses((status = 200, description = "As JSON or as CSV.", content((List<SourceBody> = "application/json"), (String = "text/csv"))), Usual))]
pub async fn sources(
    State(app): State<App>,
    Path(name): Path<String>,
    wanted: Result<Query<OnlyForm>, QueryRejection>,
    headers: HeaderMap,
    uri: Uri,
) -> Result<Response, Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let snapshot = app.now();
    let (_, view) = bank(&snapshot, &name)?;
    let items: Vec<SourceBody> = view.sources.iter().map(Into::into).collect();
    Wish::new(wanted.form, &headers, uri).answer(List::whole(items))
}

/// One source with what stands for now.
#[utoipa::path(get, operation_id = "get_source", path = "/api/v1/banks/{bank}/sources/{source}", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name"),
        ("source" = String, Path, description = "The source's name")),
    responses((status = 200, description = "As it is now.", body = SourceBody), Usual))]
pub async fn source(
    State(app): State<App>,
    Path((name, wanted)): Path<(String, String)>,
) -> Result<Response, Problem> {
    let snapshot = app.now();
    let (_, view) = bank(&snapshot, &name)?;
    let found = view.sources.iter().find(|s| *s.name == *wanted);
    let found = found.ok_or_else(|| {
        Problem::not_found(&format!("the bank \"{name}\" has no source \"{wanted}\""))
    })?;
    Ok(Json(SourceBody::from(found)).into_response())
}

/// Which windows.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct WindowsWanted {
    /// Only this source's.
    source: Option<String>,
    /// `csv` for comma-separated values; else what the Accept header says, else JSON.
    form: Option<Form>,
}

/// The values in the bank's windows, as the store and the engine hold them.
#[utoipa::path(get, operation_id = "list_windows", path = "/api/v1/banks/{bank}/windows", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name"), WindowsWanted),
    responses((status = 200, description = "As JSON or as CSV.", content((List<WindowBody> = "application/json"), (String = "text/csv"))), Usual))]
pub async fn windows(
    State(app): State<App>,
    Path(name): Path<String>,
    wanted: Result<Query<WindowsWanted>, QueryRejection>,
    headers: HeaderMap,
    uri: Uri,
) -> Result<Response, Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let (ix, view) = bank(&app.now(), &name).map(|(ix, b)| (ix, b.clone()))?;
    if let Some(source) = &wanted.source
        && !view.sources.iter().any(|s| *s.name == **source)
    {
        let why = format!("the bank \"{name}\" has no source \"{source}\"");
        return Err(Problem::not_found(&why));
    }
    let asked = Command::Windows { bank: ix };
    match app.ask("interface".into(), asked).await? {
        Outcome::Windows(windows) => {
            let is_wanted = |s: &str| wanted.source.as_deref().is_none_or(|w| w == s);
            let those = windows.into_iter().filter(|w| is_wanted(&w.source));
            let items: Vec<WindowBody> = those.map(Into::into).collect();
            Wish::new(wanted.form, &headers, uri).answer(List::whole(items))
        }
        Outcome::NotFound(why) => Err(Problem::not_found(&why)),
        Outcome::Refused(why) => Err(Problem::unavailable(&why)),
        Outcome::Notice(_) | Outcome::Line(_) | Outcome::Evidence(_) => {
            Err(Problem::internal("the answer was to another question"))
        }
    }
}

/// A bank's refusals by reason, the last of each kind.
#[utoipa::path(get, operation_id = "list_bank_refusals", path = "/api/v1/banks/{bank}/refusals", tag = "refusals",
    params(("bank" = String, Path, description = "The bank's name"), OnlyForm),
    responses((status = 200, description = "As JSON or as CSV.", content((List<RefusalBody> = "application/json"), (String = "text/csv"))), Usual))]
pub async fn refusals(
    State(app): State<App>,
    Path(name): Path<String>,
    wanted: Result<Query<OnlyForm>, QueryRejection>,
    headers: HeaderMap,
    uri: Uri,
) -> Result<Response, Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let snapshot = app.now();
    let (_, view) = bank(&snapshot, &name)?;
    let items: Vec<RefusalBody> = view.refusals.iter().map(Into::into).collect();
    Wish::new(wanted.form, &headers, uri).answer(List::whole(items))
}
