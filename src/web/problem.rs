//! Errors as RFC 9457 problem details.
//!
//! What must hold: the text says what is wrong and what to do, and gives nothing away that a caller
//! without a token must not know. Deliberately absent: the page that people see instead (that is
//! `dress`).

use axum::http::{HeaderMap, HeaderValue, StatusCode, header};
use axum::response::{IntoResponse, Response};
use serde::Serialize;
use utoipa::ToSchema;

/// The media type of RFC 9457.
const PROBLEM_JSON: &str = "application/problem+json";

/// What went wrong, for programs and people.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, ToSchema)]
pub struct Problem {
    /// Always `about:blank`: the status says the kind.
    #[serde(rename = "type")]
    pub kind: &'static str,
    /// The status in words.
    pub title: String,
    /// The HTTP status.
    pub status: u16,
    /// What is wrong here and what to do.
    pub detail: String,
}

impl Problem {
    /// A problem with this status.
    pub fn new(status: StatusCode, detail: &str) -> Self {
        Self {
            kind: "about:blank",
            title: status.canonical_reason().unwrap_or("Error").to_owned(),
            status: status.as_u16(),
            detail: detail.to_owned(),
        }
    }

    /// 400.
    pub fn bad_request(detail: &str) -> Self {
        Self::new(StatusCode::BAD_REQUEST, detail)
    }

    /// 401.
    pub fn unauthorized(detail: &str) -> Self {
        Self::new(StatusCode::UNAUTHORIZED, detail)
    }

    /// 403.
    pub fn forbidden(detail: &str) -> Self {
        Self::new(StatusCode::FORBIDDEN, detail)
    }

    /// 404.
    pub fn not_found(detail: &str) -> Self {
        Self::new(StatusCode::NOT_FOUND, detail)
    }

    /// 409.
    pub fn conflict(detail: &str) -> Self {
        Self::new(StatusCode::CONFLICT, detail)
    }

    /// 503.
    pub fn unavailable(detail: &str) -> Self {
        Self::new(StatusCode::SERVICE_UNAVAILABLE, detail)
    }

    /// 500.
    pub fn internal(detail: &str) -> Self {
        Self::new(StatusCode::INTERNAL_SERVER_ERROR, detail)
    }

    /// The status as the framework knows it.
    pub fn status_code(&self) -> StatusCode {
        StatusCode::from_u16(self.status).unwrap_or(StatusCode::INTERNAL_SERVER_ERROR)
    }
}

impl IntoResponse for Problem {
    fn into_response(self) -> Response {
        let status = self.status_code();
        let body = serde_json::to_string(&self).unwrap_or_default();
        let mut response = (status, [(header::CONTENT_TYPE, PROBLEM_JSON)], body).into_response();
        if status == StatusCode::UNAUTHORIZED {
            let how = HeaderValue::from_static("Bearer realm=\"evenrow\"");
            response.headers_mut().insert(header::WWW_AUTHENTICATE, how);
        }
        response.extensions_mut().insert(self);
        response
    }
}

/// Whether this request came from a person's browser and asks for a page.
pub fn wants_page(path: &str, headers: &HeaderMap) -> bool {
    let for_programs = ["/api/", "/metrics", "/health", "/live"];
    let accept = headers.get(header::ACCEPT).and_then(|a| a.to_str().ok());
    !for_programs.iter().any(|p| path.starts_with(p))
        && accept.is_some_and(|a| a.contains("text/html"))
}
