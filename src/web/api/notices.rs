//! Notices, and acknowledging them.

use axum::Json;
use axum::extract::rejection::{JsonRejection, QueryRejection};
use axum::extract::{Path, Query, State};
use serde::Deserialize;
use utoipa::IntoParams;

use crate::engine::{Command, Outcome};
use crate::notice::Notice;
use crate::web::problem::Problem;
use crate::web::site::App;
use crate::web::wire::{AcknowledgeBody, List, NoticeBody};

use std::sync::Arc;

/// Notices given at once when nothing else is asked.
const USUAL: usize = 100;
/// Most notices given at once.
const MOST: usize = 1000;
/// A name on a badge.
const LONGEST_NAME: usize = 80;
/// A few paragraphs.
const LONGEST_COMMENT: usize = 2000;

/// Which notices.
#[derive(Debug, Default, Deserialize, IntoParams)]
#[into_params(parameter_in = Query)]
#[serde(deny_unknown_fields)]
pub struct NoticesWanted {
    /// The `next` of the part before.
    after: Option<String>,
    /// At most so many, 1 to 1000; 100 when it is missing.
    most: Option<usize>,
}

/// Notices, newest first.
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
    let page = app
        .history(move |h| h.notices(wanted.after.as_deref(), most))
        .await?;
    Ok(Json(List::part(page)))
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

/// Acknowledges a notice. Asking twice gives the same.
#[utoipa::path(post, path = "/api/v1/notices/{id}/acknowledge", tag = "notices",
    params(("id" = String, Path, description = "The notice's id")),
    request_body = AcknowledgeBody, security(("token" = [])),
    responses((status = 200, body = NoticeBody), (status = 400, body = Problem),
        (status = 401, body = Problem), (status = 403, body = Problem),
        (status = 404, body = Problem), (status = 409, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn acknowledge(
    State(app): State<App>,
    Path(id): Path<String>,
    said: Result<Json<AcknowledgeBody>, JsonRejection>,
) -> Result<Json<NoticeBody>, Problem> {
    let Json(said) = said.map_err(|e| Problem::new(e.status(), &e.body_text()))?;
    let notice = submit(&app, &id, &said.by, &said.comment).await?;
    Ok(Json(NoticeBody::from(notice.as_ref())))
}

/// Checks and sends an acknowledgement, for the interface and the pages.
///
/// # Errors
/// 400 for a missing or overlong name or comment, else what the engine says.
pub async fn submit(app: &App, id: &str, by: &str, comment: &str) -> Result<Arc<Notice>, Problem> {
    let by = person(by)?;
    let comment = self::comment(comment)?;
    let what = Command::Acknowledge {
        notice: id.into(),
        comment: comment.to_owned(),
    };
    match app.ask(by.into(), what).await? {
        Outcome::Acknowledged(notice) => Ok(notice),
        // One that is over has left the engine: asking again gives it as it was left.
        Outcome::NotFound(why) => match app.notice(&app.now(), id).await {
            Ok(notice) if notice.acknowledged.is_some() => Ok(notice),
            _ => Err(Problem::not_found(&why)),
        },
        Outcome::Refused(why) => Err(Problem::conflict(&why)),
        Outcome::Windows(_) | Outcome::Line(_) => {
            Err(Problem::internal("the answer was to another question"))
        }
    }
}

/// The name of the person who does something.
///
/// # Errors
/// 400 when it is missing, too long or not on one line.
pub fn person(by: &str) -> Result<&str, Problem> {
    let by = by.trim();
    let is_good =
        !by.is_empty() && by.chars().count() <= LONGEST_NAME && !by.chars().any(char::is_control);
    is_good.then_some(by).ok_or_else(|| {
        Problem::bad_request("this needs the name of the person, at most 80 characters on one line")
    })
}

/// What a person wrote.
///
/// # Errors
/// 400 when it is too long.
pub fn comment(text: &str) -> Result<&str, Problem> {
    let text = text.trim();
    if text.chars().count() > LONGEST_COMMENT {
        return Err(Problem::bad_request(
            "a comment or reason has at most 2000 characters",
        ));
    }
    Ok(text)
}
