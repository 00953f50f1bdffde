//! Notices, and acknowledging them.

use axum::Json;
use axum::extract::rejection::{JsonRejection, QueryRejection};
use axum::extract::{Path, Query, State};
use serde::Deserialize;
use utoipa::IntoParams;

use crate::web::acknowledge::submit;
use crate::web::problem::Problem;
use crate::web::site::App;
use crate::web::wire::{AcknowledgeBody, List, NoticeBody};

/// Notices given at once when nothing else is asked.
const USUAL: usize = 100;
/// Most notices given at once.
const MOST: usize = 1000;

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
