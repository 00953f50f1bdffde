//! Notices.

use axum::Json;
use axum::extract::rejection::QueryRejection;
use axum::extract::{Path, Query, State};
use axum::http::{HeaderMap, Uri};
use axum::response::Response;
use serde::Deserialize;
use utoipa::IntoParams;

use crate::engine::{History, HistoryError, Page};
use crate::model::Time;
use crate::notice::Notice;
use crate::web::problem::Problem;
use crate::web::site::App;
use crate::web::wire::{List, NoticeBody};

use super::answers::Usual;
use super::form::{Form, Wish};
use super::times;

/// Notices given at once when nothing else is asked.
const USUAL: usize = 100;
/// Most notices given at once.
const MOST: usize = 1000;

/// Notices read from the store at a time.
const PART: usize = 200;
/// Notices gone through for one answer; where nothing fits among them, `next` goes on from there.
const MOST_READ: usize = 4000;

/// Which notices.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct NoticesWanted {
    /// Only this bank's.
    bank: Option<String>,
    /// Only those that name this source.
    source: Option<String>,
    /// Only of this kind, in the word of `kind`.
    kind: Option<String>,
    /// Only in this state, in the word of `state`.
    state: Option<String>,
    /// Only of this priority: `low`, `medium` or `high`.
    priority: Option<String>,
    /// Raised at or after this time (RFC 3339).
    #[param(value_type = Option<String>, format = DateTime)]
    from: Option<String>,
    /// Raised before this time (RFC 3339).
    #[param(value_type = Option<String>, format = DateTime)]
    to: Option<String>,
    /// The `next` of the part before.
    after: Option<String>,
    /// At most so many, 1 to 1000; 100 when it is missing.
    #[param(minimum = 1, maximum = 1000)]
    most: Option<usize>,
    /// `csv` for comma-separated values; else what the Accept header says, else JSON.
    form: Option<Form>,
}

/// The query, read.
struct Filter {
    bank: Option<String>,
    source: Option<String>,
    kind: Option<String>,
    state: Option<String>,
    priority: Option<String>,
    from: Option<Time>,
    to: Option<Time>,
}

impl Filter {
    fn lets(&self, notice: &Notice) -> bool {
        let same = |asked: &Option<String>, is: &str| asked.as_ref().is_none_or(|a| a == is);
        let names = |s: &String| notice.sources.iter().any(|n| *n.source == **s);
        same(&self.bank, &notice.bank)
            && same(&self.kind, notice.kind.word())
            && same(&self.state, notice.state.word())
            && same(&self.priority, notice.priority.word())
            && self.source.as_ref().is_none_or(names)
            && self.from.is_none_or(|from| notice.raised >= from)
            && self.to.is_none_or(|to| notice.raised < to)
    }

    /// Reads parts until `most` are found, or there are no more, or enough was gone through.
    fn read(
        &self,
        history: &dyn History,
        after: Option<String>,
        most: usize,
    ) -> Result<Page<Notice>, HistoryError> {
        let (mut items, mut after, mut read) = (Vec::new(), after, 0);
        loop {
            let part = history.notices(after.as_deref(), PART)?;
            read += part.items.len();
            let past = part.items.last().map(|n| n.raised);
            for notice in part.items {
                if items.len() == most {
                    let next = items.last().map(|n: &Notice| n.id.to_string());
                    return Ok(Page { items, next });
                }
                if self.lets(&notice) {
                    items.push(notice);
                }
            }
            after = part.next;
            let over = self.from.zip(past).is_some_and(|(from, past)| past < from);
            if over || after.is_none() {
                return Ok(Page { items, next: None });
            }
            if read >= MOST_READ {
                return Ok(Page { items, next: after });
            }
        }
    }
}

/// Notices, newest first.
#[utoipa::path(get, operation_id = "list_notices", path = "/api/v1/notices", tag = "notices", params(NoticesWanted),
    responses((status = 200, description = "As JSON or as CSV.", content((List<NoticeBody> = "application/json"), (String = "text/csv"))), Usual))]
pub async fn list(
    State(app): State<App>,
    wanted: Result<Query<NoticesWanted>, QueryRejection>,
    headers: HeaderMap,
    uri: Uri,
) -> Result<Response, Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let most = times::most(wanted.most, USUAL, MOST)?;
    let filter = Filter {
        bank: wanted.bank,
        source: wanted.source,
        kind: wanted.kind,
        state: wanted.state,
        priority: wanted.priority,
        from: times::read("from", wanted.from)?,
        to: times::read("to", wanted.to)?,
    };
    let after = wanted.after;
    let page = app.history(move |h| filter.read(h, after, most)).await?;
    Wish::new(wanted.form, &headers, uri).answer(List::<NoticeBody>::part(page))
}

/// One notice.
#[utoipa::path(get, operation_id = "get_notice", path = "/api/v1/notices/{id}", tag = "notices",
    params(("id" = String, Path, description = "The notice's id")),
    responses((status = 200, description = "As it is now.", body = NoticeBody), Usual))]
pub async fn one(
    State(app): State<App>,
    Path(id): Path<String>,
) -> Result<Json<NoticeBody>, Problem> {
    let notice = app.notice(&app.now(), &id).await?;
    Ok(Json(NoticeBody::from(notice.as_ref())))
}
