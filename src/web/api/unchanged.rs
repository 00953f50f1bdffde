//! Entity tags: who has the newest answer already is told so, and gets no body again.

use std::hash::{DefaultHasher, Hash as _, Hasher as _};

use axum::body::Body;
use axum::extract::Request;
use axum::http::{HeaderMap, HeaderValue, Method, StatusCode, header};
use axum::middleware::Next;
use axum::response::{IntoResponse, Response};

use crate::web::problem::Problem;

/// The largest answer, all windows of a thousand sources, is below this.
const LARGEST_BYTES: usize = 256 << 20;

/// Tags answers of 200 to GET, and answers 304 where the tag is known.
pub async fn layer(request: Request, next: Next) -> Response {
    let get = matches!(*request.method(), Method::GET | Method::HEAD);
    let known = request.headers().get(header::IF_NONE_MATCH).cloned();
    let response = next.run(request).await;
    if !get || response.status() != StatusCode::OK || streams(response.headers()) {
        return response;
    }
    let (mut parts, body) = response.into_parts();
    let bytes = match axum::body::to_bytes(body, LARGEST_BYTES).await {
        Ok(bytes) => bytes,
        Err(error) => return Problem::internal(&error.to_string()).into_response(),
    };
    let mut hasher = DefaultHasher::new();
    bytes.hash(&mut hasher);
    let tag = format!("W/\"{:016x}\"", hasher.finish());
    let is_known = known.is_some_and(|k| matches(&k, &tag));
    if let Ok(tag) = HeaderValue::from_str(&tag) {
        parts.headers.insert(header::ETAG, tag);
    }
    let fresh = HeaderValue::from_static("private, no-cache");
    parts.headers.insert(header::CACHE_CONTROL, fresh);
    let vary = HeaderValue::from_static("accept, accept-encoding");
    parts.headers.insert(header::VARY, vary);
    if is_known {
        parts.status = StatusCode::NOT_MODIFIED;
        parts.headers.remove(header::CONTENT_TYPE);
        parts.headers.remove(header::CONTENT_LENGTH);
        return Response::from_parts(parts, Body::empty());
    }
    Response::from_parts(parts, Body::from(bytes))
}

fn streams(headers: &HeaderMap) -> bool {
    let kind = headers.get(header::CONTENT_TYPE);
    kind.is_some_and(|k| k.as_bytes().starts_with(b"text/event-stream"))
}

/// RFC 9110, 13.1.2: weak comparison with any of the tags, or `*`.
fn matches(known: &HeaderValue, tag: &str) -> bool {
    let bare = |t: &str| t.trim().trim_start_matches("W/").to_owned();
    let known = known.to_str().unwrap_or_default();
    known.trim() == "*" || known.split(',').any(|one| bare(one) == bare(tag))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tags_are_compared_weakly() {
        for (known, same) in [
            ("W/\"a\"", true),
            ("\"a\"", true),
            ("\"b\", W/\"a\"", true),
            ("*", true),
            ("\"b\"", false),
            ("", false),
        ] {
            let header = HeaderValue::from_str(known).expect("a header");
            assert_eq!(matches(&header, "W/\"a\""), same, "{known}");
        }
    }
}
