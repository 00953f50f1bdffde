//! Notices.

use axum::Json;
use axum::extract::rejection::QueryRejection;
use axum::extract::{Path, Query, State};
use serde::Deserialize;
use utoipa::IntoParams;

use crate::engine::{History, HistoryError, Page};
use crate::model::Time;
use crate::notice::{Kind, Notice, Priority, State as NoticeState};
use crate::web::problem::Problem;
use crate::web::site::App;
use crate::web::wire::{List, NoticeBody};

/// Notices given at once when nothing else is asked.
const USUAL: usize = 100;
/// Most notices given at once.
const MOST: usize = 1000;
/// Notices among which those asked for are sought before a part ends: a request stays short.
const MOST_SOUGHT: usize = 20_000;

/// Which notices.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct NoticesWanted {
    /// The `next` of the part before.
    after: Option<String>,
    /// At most so many, 1 to 1000; 100 when it is missing.
    most: Option<usize>,
    /// Only those in this state now, such as `unacknowledged`.
    state: Option<String>,
    /// Only those of this kind, such as `source_silent`.
    kind: Option<String>,
    /// Only those of this bank.
    bank: Option<String>,
    /// Only those of this priority: `low`, `medium` or `high`.
    priority: Option<String>,
    /// Only those raised at or after this time (RFC 3339).
    from: Option<String>,
    /// Only those raised before this time.
    to: Option<String>,
}

/// What is asked for, checked.
#[derive(Debug, Default)]
struct Sieve {
    state: Option<NoticeState>,
    kind: Option<Kind>,
    bank: Option<String>,
    priority: Option<Priority>,
    from: Option<Time>,
    to: Option<Time>,
}

impl Sieve {
    fn of(wanted: &NoticesWanted) -> Result<Self, Problem> {
        let states = NoticeState::ALL.map(|s| (s.word(), s));
        let kinds = Kind::ALL.map(|k| (k.word(), k));
        let priorities = [Priority::Low, Priority::Medium, Priority::High].map(|p| (p.word(), p));
        Ok(Self {
            state: word("state", wanted.state.as_deref(), &states)?,
            kind: word("kind", wanted.kind.as_deref(), &kinds)?,
            bank: wanted.bank.clone(),
            priority: word("priority", wanted.priority.as_deref(), &priorities)?,
            from: time("from", wanted.from.as_deref())?,
            to: time("to", wanted.to.as_deref())?,
        })
    }

    fn lets(&self, notice: &Notice) -> bool {
        self.state.is_none_or(|s| s == notice.state)
            && self.kind.is_none_or(|k| k == notice.kind)
            && self.bank.as_ref().is_none_or(|b| **b == *notice.bank)
            && self.priority.is_none_or(|p| p == notice.priority)
            && self.from.is_none_or(|at| notice.raised >= at)
            && self.to.is_none_or(|at| notice.raised < at)
    }
}

fn word<T: Copy>(
    name: &str,
    given: Option<&str>,
    known: &[(&str, T)],
) -> Result<Option<T>, Problem> {
    let Some(given) = given else {
        return Ok(None);
    };
    let found = known.iter().find(|(word, _)| *word == given);
    let words: Vec<&str> = known.iter().map(|(word, _)| *word).collect();
    found
        .map(|(_, it)| Some(*it))
        .ok_or_else(|| Problem::bad_request(&format!("`{name}` is one of: {}", words.join(", "))))
}

fn time(name: &str, given: Option<&str>) -> Result<Option<Time>, Problem> {
    let read = given.map(Time::parse_rfc3339).transpose();
    read.map_err(|why| Problem::bad_request(&format!("`{name}`: {why}")))
}

/// Notices, newest first. With a filter a part may hold fewer than `most` although `next` leads on.
#[utoipa::path(get, path = "/api/v1/notices", tag = "notices", params(NoticesWanted),
    responses((status = 200, body = List<NoticeBody>), (status = 400, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn list(
    State(app): State<App>,
    wanted: Result<Query<NoticesWanted>, QueryRejection>,
) -> Result<Json<List<NoticeBody>>, Problem> {
    let Query(wanted) = wanted.map_err(|e| Problem::bad_request(&e.body_text()))?;
    let most = wanted.most.unwrap_or(USUAL);
    if !(1..=MOST).contains(&most) {
        return Err(Problem::bad_request(
            "`most` must be a whole number from 1 to 1000",
        ));
    }
    let sieve = Sieve::of(&wanted)?;
    let page = app
        .history(move |h| sought(h, wanted.after, most, &sieve))
        .await?;
    Ok(Json(List::part(page)))
}

/// The newest of those asked for.
fn sought(
    history: &dyn History,
    mut after: Option<String>,
    most: usize,
    sieve: &Sieve,
) -> Result<Page<Notice>, HistoryError> {
    let mut items = Vec::new();
    let mut seen = 0;
    loop {
        let part = history.notices(after.as_deref(), most - items.len())?;
        seen += part.items.len();
        // They come by the time they were raised.
        let is_past = |n: &Notice| sieve.from.is_some_and(|at| n.raised < at);
        let over = part.items.last().is_some_and(is_past);
        items.extend(part.items.into_iter().filter(|n| sieve.lets(n)));
        let next = part.next.filter(|_| !over);
        if next.is_none() || items.len() == most || seen >= MOST_SOUGHT {
            return Ok(Page { items, next });
        }
        after = next;
    }
}

/// One notice.
#[utoipa::path(get, path = "/api/v1/notices/{id}", tag = "notices",
    params(("id" = String, Path, description = "The notice's id")),
    responses((status = 200, body = NoticeBody), (status = 404, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn one(
    State(app): State<App>,
    Path(id): Path<String>,
) -> Result<Json<NoticeBody>, Problem> {
    let notice = app.notice(&app.now(), &id).await?;
    Ok(Json(NoticeBody::from(notice.as_ref())))
}
