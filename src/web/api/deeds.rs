//! What people do with a notice.

use axum::Json;
use axum::extract::rejection::JsonRejection;
use axum::extract::{Path, State};

use crate::notice::{Deed, Shelving};
use crate::web::deeds::{outcome, shelve as shelving, submit};
use crate::web::problem::Problem;
use crate::web::site::App;
use crate::web::wire::{AcknowledgeBody, CommentBody, NoticeBody, SaidBody, ShelveBody};

type Sent<T> = Result<Json<T>, JsonRejection>;
type Answer = Result<Json<NoticeBody>, Problem>;

fn read<T>(sent: Sent<T>) -> Result<T, Problem> {
    let Json(said) = sent.map_err(|e| Problem::new(e.status(), &e.body_text()))?;
    Ok(said)
}

async fn done(app: &App, id: &str, deed: Deed, said: (&str, &str)) -> Answer {
    let notice = submit(app, id, deed, said).await?;
    Ok(Json(NoticeBody::from(notice.as_ref())))
}

/// Acknowledges a notice, perhaps with what came of it. Asking twice gives the same.
#[utoipa::path(post, operation_id = "acknowledge_notice", path = "/api/v1/notices/{id}/acknowledge", tag = "notices",
    params(("id" = String, Path, description = "The notice's id")),
    request_body = AcknowledgeBody, security(("token" = [])),
    responses((status = 200, body = NoticeBody), (status = 400, body = Problem),
        (status = 401, body = Problem), (status = 403, body = Problem),
        (status = 404, body = Problem), (status = 409, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn acknowledge(
    State(app): State<App>,
    Path(id): Path<String>,
    sent: Sent<AcknowledgeBody>,
) -> Answer {
    let AcknowledgeBody {
        by,
        comment,
        outcome: word,
    } = read(sent)?;
    let deed = Deed::Acknowledge(outcome(word.as_deref())?);
    done(&app, &id, deed, (&by, &comment)).await
}

/// Comments on a notice, or says what came of it; also when it is just over.
#[utoipa::path(post, operation_id = "comment_notice", path = "/api/v1/notices/{id}/comment", tag = "notices",
    params(("id" = String, Path, description = "The notice's id")),
    request_body = CommentBody, security(("token" = [])),
    responses((status = 200, body = NoticeBody), (status = 400, body = Problem),
        (status = 401, body = Problem), (status = 403, body = Problem),
        (status = 404, body = Problem), (status = 409, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn comment(
    State(app): State<App>,
    Path(id): Path<String>,
    sent: Sent<CommentBody>,
) -> Answer {
    let CommentBody {
        by,
        comment,
        outcome: word,
    } = read(sent)?;
    let deed = Deed::Comment(outcome(word.as_deref())?);
    done(&app, &id, deed, (&by, &comment)).await
}

/// Sets a notice aside for a time. It keeps evaluating, and asks again when the time is over.
#[utoipa::path(post, operation_id = "shelve_notice", path = "/api/v1/notices/{id}/shelve", tag = "notices",
    params(("id" = String, Path, description = "The notice's id")),
    request_body = ShelveBody, security(("token" = [])),
    responses((status = 200, body = NoticeBody), (status = 400, body = Problem),
        (status = 401, body = Problem), (status = 403, body = Problem),
        (status = 404, body = Problem), (status = 409, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn shelve(
    State(app): State<App>,
    Path(id): Path<String>,
    sent: Sent<ShelveBody>,
) -> Answer {
    let ShelveBody {
        by,
        comment,
        for_minutes,
        once,
    } = read(sent)?;
    let how = if once {
        Shelving::Once
    } else {
        Shelving::Timed
    };
    done(&app, &id, shelving(for_minutes, how)?, (&by, &comment)).await
}

/// Takes a notice back from where it was set aside.
#[utoipa::path(post, operation_id = "unshelve_notice", path = "/api/v1/notices/{id}/unshelve", tag = "notices",
    params(("id" = String, Path, description = "The notice's id")),
    request_body = SaidBody, security(("token" = [])),
    responses((status = 200, body = NoticeBody), (status = 400, body = Problem),
        (status = 401, body = Problem), (status = 403, body = Problem),
        (status = 404, body = Problem), (status = 409, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn unshelve(
    State(app): State<App>,
    Path(id): Path<String>,
    sent: Sent<SaidBody>,
) -> Answer {
    let SaidBody { by, comment } = read(sent)?;
    done(&app, &id, Deed::Unshelve, (&by, &comment)).await
}

/// Takes a notice out of service until somebody puts it back.
#[utoipa::path(post, operation_id = "out_of_service_notice", path = "/api/v1/notices/{id}/out-of-service", tag = "notices",
    params(("id" = String, Path, description = "The notice's id")),
    request_body = SaidBody, security(("token" = [])),
    responses((status = 200, body = NoticeBody), (status = 400, body = Problem),
        (status = 401, body = Problem), (status = 403, body = Problem),
        (status = 404, body = Problem), (status = 409, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn out_of_service(
    State(app): State<App>,
    Path(id): Path<String>,
    sent: Sent<SaidBody>,
) -> Answer {
    let SaidBody { by, comment } = read(sent)?;
    done(&app, &id, Deed::TakeOut, (&by, &comment)).await
}

/// Puts a notice back in service.
#[utoipa::path(post, operation_id = "in_service_notice", path = "/api/v1/notices/{id}/in-service", tag = "notices",
    params(("id" = String, Path, description = "The notice's id")),
    request_body = SaidBody, security(("token" = [])),
    responses((status = 200, body = NoticeBody), (status = 400, body = Problem),
        (status = 401, body = Problem), (status = 403, body = Problem),
        (status = 404, body = Problem), (status = 409, body = Problem),
        (status = 503, body = Problem), (status = "default", body = Problem)))]
pub async fn in_service(
    State(app): State<App>,
    Path(id): Path<String>,
    sent: Sent<SaidBody>,
) -> Answer {
    let SaidBody { by, comment } = read(sent)?;
    done(&app, &id, Deed::PutBack, (&by, &comment)).await
}
