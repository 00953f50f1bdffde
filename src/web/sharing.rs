//! Pages made once for many viewers: whoever is not signed in sees the same page as everybody else.
//!
//! What must hold: nobody gets a page made from an older present than the one they ask from (the
//! newest, or the version that the stream told them of); a page that stands still is made anew every
//! few seconds, because it says how long ago things were.

use std::io::Write as _;
use std::sync::Arc;

use axum::body::{Bytes, HttpBody as _};
use axum::extract::{Request, State};
use axum::http::{HeaderMap, HeaderValue, Method, StatusCode, header};
use axum::middleware::Next;
use axum::response::{IntoResponse as _, Response};

use crate::model::US_PER_S;

use super::access::Caller;
use super::kept::Finished;
use super::problem::{Problem, wants_page};
use super::site::App;

/// "12 min ago" must not grow old.
const LASTS_US: i64 = 5 * US_PER_S;
/// No page is larger; a thousand banks make two megabytes.
const LARGEST_BYTES: usize = 16 << 20;
/// With this the script says from which version on a page will do.
const AT_LEAST: &str = "evenrow-at-least";

/// Gives a page that was made already, or makes it.
pub async fn layer(State(app): State<App>, request: Request, next: Next) -> Response {
    let anonymous = request
        .extensions()
        .get::<Caller>()
        .is_some_and(|c| c.session.is_none());
    let page = *request.method() == Method::GET
        && wants_page(request.uri().path(), request.headers())
        && anonymous;
    if !page {
        return next.run(request).await;
    }
    let squeezed = takes_gzip(request.headers());
    let at_least = number(request.headers(), AT_LEAST);
    let place = app.kept.place((request.uri().to_string(), squeezed));
    let mut place = place.lock().await;
    let (now, clock) = (app.now(), app.site.clock.now());
    let good = |f: &&Finished| {
        let new = Arc::ptr_eq(&f.from, &now) || at_least.is_some_and(|v| f.from.version >= v);
        new && (0..LASTS_US).contains(&clock.us_since(f.made))
    };
    if let Some(finished) = place.as_ref().filter(good) {
        return finished.answer();
    }
    let response = next.run(request).await;
    if response.status() != StatusCode::OK {
        return response;
    }
    match finish(response, squeezed).await {
        Ok((headers, bytes)) => {
            let finished = Finished {
                from: now,
                made: clock,
                headers,
                bytes,
            };
            let answer = finished.answer();
            *place = Some(finished);
            answer
        }
        Err(why) => {
            Problem::internal(&format!("the page could not be finished: {why}")).into_response()
        }
    }
}

async fn finish(response: Response, squeezed: bool) -> Result<(HeaderMap, Bytes), axum::BoxError> {
    let (mut parts, body) = response.into_parts();
    let hint = body.size_hint().exact().unwrap_or(0);
    let plain = axum::body::to_bytes(body, LARGEST_BYTES).await?;
    parts.headers.remove(header::CONTENT_LENGTH);
    parts
        .headers
        .insert(header::VARY, HeaderValue::from_static("accept-encoding"));
    if !squeezed {
        return Ok((parts.headers, plain));
    }
    let room = usize::try_from(hint).unwrap_or(0) / 4;
    let mut encoder =
        flate2::write::GzEncoder::new(Vec::with_capacity(room), flate2::Compression::fast());
    encoder.write_all(&plain)?;
    let gzip = HeaderValue::from_static("gzip");
    parts.headers.insert(header::CONTENT_ENCODING, gzip);
    Ok((parts.headers, encoder.finish()?.into()))
}

fn takes_gzip(headers: &HeaderMap) -> bool {
    let accepted = headers.get_all(header::ACCEPT_ENCODING).into_iter();
    let mut parts = accepted
        .filter_map(|h| h.to_str().ok())
        .flat_map(|h| h.split(','));
    parts.any(|part| {
        let mut words = part.split(';').map(str::trim);
        words.next() == Some("gzip") && !matches!(words.next(), Some("q=0" | "q=0.0"))
    })
}

fn number(headers: &HeaderMap, name: &str) -> Option<u64> {
    headers.get(name)?.to_str().ok()?.parse().ok()
}
