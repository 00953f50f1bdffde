//! Looks: their short forms over time, and whole ones.

use axum::extract::rejection::{PathRejection, QueryRejection};
use axum::extract::{Path, Query, State};
use axum::http::{HeaderMap, Uri};
use axum::response::Response;
use serde::Deserialize;
use utoipa::IntoParams;

use crate::model::{Time, US_PER_DAY};
use crate::verdict::Digest;
use crate::web::problem::Problem;
use crate::web::site::{App, bank};
use crate::web::wire::{DigestBody, List, LookBody};

use super::answers::Usual;
use super::form::{Form, Wish};
use super::times;

/// Looks of a day at the default settings are 11 520; a part holds a tenth of them.
const MOST_LOOKS: usize = 1000;

/// Which looks.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct LooksWanted {
    /// Only looks over this many values of each source.
    span: Option<usize>,
    /// At or after this time (RFC 3339); a day before `to` when it is missing.
    #[param(value_type = Option<String>, format = DateTime)]
    from: Option<String>,
    /// Before this time (RFC 3339); now when it is missing.
    #[param(value_type = Option<String>, format = DateTime)]
    to: Option<String>,
    /// At most so many, 1 to 1000; 1000 when it is missing. The newest in the range are given.
    #[param(minimum = 1, maximum = 1000)]
    most: Option<usize>,
    /// `csv` for comma-separated values; else what the Accept header says, else JSON.
    form: Option<Form>,
}

/// Short forms of past looks, oldest first. `next`, when there is one, is the `to` that gives those
/// before.
#[utoipa::path(get, operation_id = "list_looks", path = "/api/v1/banks/{bank}/looks", tag = "looks",
    params(("bank" = String, Path, description = "The bank's name"), LooksWanted),
    responses((status = 200, description = "As JSON or as CSV.", content((List<DigestBody> = "application/json"), (String = "text/csv"))), Usual))]
pub async fn list(
    State(app): State<App>,
    Path(name): Path<String>,
    wanted: Result<Query<LooksWanted>, QueryRejection>,
    headers: HeaderMap,
    uri: Uri,
) -> Result<Response, Problem> {
    bank(&app.now(), &name)?;
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let to = times::read("to", wanted.to)?.unwrap_or_else(|| app.site.clock.now().plus_us(1));
    let from = times::read("from", wanted.from)?.unwrap_or_else(|| to.plus_us(-US_PER_DAY));
    let most = times::most(wanted.most, MOST_LOOKS, MOST_LOOKS)?;
    let span = wanted.span;
    // A moment has a look for each span: of one span there are as many in a part as of all together.
    let found = app
        .history(move |h| {
            let spans = if span.is_some() { SPANS_OF_A_MOMENT } else { 1 };
            h.digests(&name, from, to, most.saturating_mul(spans))
        })
        .await?;
    let (found, next) = whole_moments(found, most, span);
    let items = found.into_iter().map(Into::into).collect();
    Wish::new(wanted.form, &headers, uri).answer(List::<DigestBody> { items, next })
}

/// A bank has a handful of spans; more than these are not read for one.
const SPANS_OF_A_MOMENT: usize = 8;

/// A full part may begin in the middle of one moment's looks: leaves those to the next part, whose
/// `to` is the first moment kept.
fn whole_moments(
    found: Vec<Digest>,
    most: usize,
    span: Option<usize>,
) -> (Vec<Digest>, Option<String>) {
    let read = found.len();
    let Some(span) = span else {
        let Some(first) = found.first().map(|d| d.at).filter(|_| read >= most) else {
            return (found, None);
        };
        let mut kept = found;
        if kept.last().is_some_and(|d| d.at > first) {
            kept.retain(|d| d.at > first);
        }
        let next = kept.first().map(|d| d.at.to_string());
        return (kept, next);
    };
    let is_full = read >= most.saturating_mul(SPANS_OF_A_MOMENT);
    let oldest = found.first().map(|d| d.at);
    let mut those: Vec<Digest> = found.into_iter().filter(|d| d.span == span).collect();
    let cut = those.len().saturating_sub(most);
    let kept = those.split_off(cut);
    let next = if cut > 0 {
        kept.first().map(|d| d.at)
    } else {
        oldest.filter(|_| is_full)
    };
    (kept, next.map(|at| at.to_string()))
}

/// Which look.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct LookWanted {
    /// The newest at or before this time (RFC 3339) that was kept whole; the newest of all when it is
    /// missing.
    #[param(value_type = Option<String>, format = DateTime)]
    at: Option<String>,
    /// `csv` for comma-separated values; else what the Accept header says, else JSON.
    form: Option<Form>,
}

/// One look whole: every test, and every source with its intervals.
#[utoipa::path(get, operation_id = "get_look", path = "/api/v1/banks/{bank}/looks/{span}", tag = "looks",
    params(("bank" = String, Path, description = "The bank's name"),
        ("span" = usize, Path, description = "Values of each source"), LookWanted),
    responses((status = 200, description = "As JSON or as CSV.", content((LookBody = "application/json"), (String = "text/csv"))), Usual))]
pub async fn one(
    State(app): State<App>,
    path: Result<Path<(String, usize)>, PathRejection>,
    wanted: Result<Query<LookWanted>, QueryRejection>,
    headers: HeaderMap,
    uri: Uri,
) -> Result<Response, Problem> {
    let Path((name, span)) = path.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let at = times::read("at", wanted.at)?;
    let snapshot = app.now();
    let (_, view) = bank(&snapshot, &name)?;
    let mut present = view.looks.iter().filter(|l| l.span == span);
    let newest = present.find(|l| at.is_none_or(|at| l.at <= at));
    let body = match newest {
        Some(look) => LookBody::from(look.as_ref()),
        None => {
            let before = at.unwrap_or_else(|| app.site.clock.now());
            let kept = kept(&app, name.clone(), span, before).await?;
            let none = || {
                let why = format!("no look over {span} values of \"{name}\" was kept whole before");
                Problem::not_found(&why)
            };
            kept.ok_or_else(none)?
        }
    };
    Wish::new(wanted.form, &headers, uri).answer_one(body)
}

async fn kept(app: &App, name: String, span: usize, at: Time) -> Result<Option<LookBody>, Problem> {
    let looks = app.history(move |h| h.looks_at(&name, at)).await?;
    let found = looks.iter().find(|l| l.span == span);
    Ok(found.map(LookBody::from))
}
