//! The outermost layer: every error leaves as a problem, or as a page for people who came with a
//! browser.
//!
//! Owns the form of every answer with a status of 400 or more, also of those that the web framework
//! makes.

use axum::extract::{Request, State};
use axum::http::{StatusCode, header};
use axum::middleware::Next;
use axum::response::{IntoResponse, Response};

use super::pages::frame;
use super::problem::{Problem, wants_page};
use super::site::App;

/// Dresses an error.
pub async fn dress(State(app): State<App>, request: Request, next: Next) -> Response {
    let page = wants_page(request.uri().path(), request.headers());
    let path = request.uri().path().to_owned();
    let response = next.run(request).await;
    let status = response.status();
    if !status.is_client_error() && !status.is_server_error() {
        return response;
    }
    let problem = match response.extensions().get::<Problem>() {
        Some(problem) => problem.clone(),
        None => Problem::new(status, &words(status, &path)),
    };
    let mut dressed = if page {
        let body = frame::error(&app, &problem);
        (problem.status_code(), body).into_response()
    } else {
        problem.into_response()
    };
    for name in [header::ALLOW, header::RETRY_AFTER] {
        if let Some(text) = response.headers().get(&name) {
            dressed.headers_mut().insert(name, text.clone());
        }
    }
    dressed
}

/// What to say when the framework itself refused.
fn words(status: StatusCode, path: &str) -> String {
    match status {
        StatusCode::NOT_FOUND => format!("there is nothing at {path}"),
        StatusCode::METHOD_NOT_ALLOWED => {
            format!("{path} does not take this method; the Allow header says which it takes")
        }
        StatusCode::PAYLOAD_TOO_LARGE => "the request's body is larger than 64 KiB".to_owned(),
        StatusCode::REQUEST_TIMEOUT => "the request took longer than 30 seconds".to_owned(),
        StatusCode::UNSUPPORTED_MEDIA_TYPE => {
            "the body's Content-Type is not one that this address takes".to_owned()
        }
        _ => "the request could not be served".to_owned(),
    }
}
