//! Looks and calls taken apart: what a call rested on, worked out again.
//!
//! Which look is meant is decided in [`which`], the same for the interface and for `evenrow explain` on a
//! store that no daemon has open. Deliberately absent: how it is worked out (that is the engine's).

use axum::Json;
use axum::extract::rejection::QueryRejection;
use axum::extract::{Path, Query, State};
use serde::Deserialize;
use utoipa::IntoParams;

use crate::engine::{Command, History, HistoryError, Outcome};
use crate::model::Time;
use crate::web::problem::Problem;
use crate::web::site::{App, bank};
use crate::web::wire::ExplanationBody;

use super::answers::Usual;
use super::times;

/// Notices read at once while looking for a bank's newest.
const AT_ONCE: usize = 100;

/// Which look.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct LookWanted {
    /// The newest call, else the newest look that was kept, at or before this time (RFC 3339); the newest
    /// call of all, else a look taken now, when it is missing.
    at: Option<String>,
}

/// A look and, where there was one, the call made with it, taken apart so that they can be repeated by hand.
#[utoipa::path(get, operation_id = "explain_bank", path = "/api/v1/banks/{bank}/explain", tag = "banks",
    params(("bank" = String, Path, description = "The bank's name"), LookWanted),
    responses((status = 200, body = ExplanationBody), Usual))]
pub async fn bank_explained(
    State(app): State<App>,
    Path(name): Path<String>,
    wanted: Result<Query<LookWanted>, QueryRejection>,
) -> Result<Json<ExplanationBody>, Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let at = times::read("at", wanted.at)?;
    let (ix, unit) =
        bank(&app.now(), &name).map(|(ix, b)| (ix, b.bank.characteristic.unit.to_string()))?;
    let of_bank = name.clone();
    let kept = app.history(move |h| which(h, &of_bank, &unit, at)).await?;
    if let Some(kept) = kept {
        return Ok(Json(kept));
    }
    if at.is_some() {
        return Err(Problem::not_found(&format!(
            "nothing was kept of bank \"{name}\" at or before that time"
        )));
    }
    let asked = app.ask("interface".into(), Command::Evidence { bank: ix });
    match asked.await? {
        Outcome::Evidence(evidence) => Ok(Json(ExplanationBody::of_evidence(&evidence, None))),
        Outcome::NotFound(why) => Err(Problem::not_found(&why)),
        Outcome::Refused(why) => Err(Problem::unavailable(&why)),
        Outcome::Notice(_) | Outcome::Line(_) | Outcome::Windows(_) => {
            Err(Problem::internal("the answer was to another question"))
        }
    }
}

/// What a notice's call rested on, taken apart.
#[utoipa::path(get, operation_id = "get_evidence", path = "/api/v1/notices/{id}/evidence", tag = "notices",
    params(("id" = String, Path, description = "The notice's id")),
    responses((status = 200, body = ExplanationBody), Usual))]
pub async fn evidence(
    State(app): State<App>,
    Path(id): Path<String>,
) -> Result<Json<ExplanationBody>, Problem> {
    let wanted = id.clone();
    let kept = app.history(move |h| of_notice(h, &wanted)).await?;
    let missing = || Problem::not_found(&format!("no evidence is kept of a notice \"{id}\""));
    kept.map(Json).ok_or_else(missing)
}

/// What a notice's call rested on, taken apart; `None` when nothing was kept with it.
///
/// # Errors
/// When the store cannot be read.
pub fn of_notice(history: &dyn History, id: &str) -> Result<Option<ExplanationBody>, HistoryError> {
    let evidence = history.evidence(id)?;
    Ok(evidence.map(|e| ExplanationBody::of_evidence(&e, Some(id))))
}

/// The newest call of a bank at or before `at` (of all, without), else the newest look kept then; `None`
/// when there is neither, or (without a time) no call.
///
/// # Errors
/// When the store cannot be read.
pub fn which(
    history: &dyn History,
    bank: &str,
    unit: &str,
    at: Option<Time>,
) -> Result<Option<ExplanationBody>, HistoryError> {
    let mut after: Option<String> = None;
    loop {
        let page = history.notices(after.as_deref(), AT_ONCE)?;
        let of_bank = page.items.iter().filter(|n| &*n.bank == bank);
        for notice in of_bank.filter(|n| at.is_none_or(|at| n.raised <= at)) {
            if let Some(found) = of_notice(history, &notice.id)? {
                return Ok(Some(found));
            }
        }
        if page.next.is_none() {
            break;
        }
        after = page.next;
    }
    let Some(at) = at else {
        return Ok(None);
    };
    let looks = history.looks_at(bank, at)?;
    Ok(ExplanationBody::of_looks(bank, unit, &looks))
}
