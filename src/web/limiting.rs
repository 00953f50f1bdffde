//! The layer that holds back who asks too much or guesses tokens.

use std::net::{IpAddr, SocketAddr};

use axum::extract::{ConnectInfo, Request, State};
use axum::http::{HeaderValue, StatusCode, header};
use axum::middleware::Next;
use axum::response::{IntoResponse, Response};

use super::limits::Asked;
use super::problem::Problem;
use super::signin::WrongToken;
use super::site::App;

/// Counts requests and wrong tokens by the address they come from.
pub async fn layer(State(app): State<App>, request: Request, next: Next) -> Response {
    let from = request.extensions().get::<ConnectInfo<SocketAddr>>();
    let Some(from) = from.map(|info| info.0.ip()) else {
        // Only a router without a listener gets here: nobody is far away then.
        return next.run(request).await;
    };
    let now = app.site.clock.now();
    let bearer = request.headers().contains_key(header::AUTHORIZATION);
    let tries = bearer || (request.uri().path() == "/sign-in" && request.method() == "POST");
    let taken = app.limits.take(from, Asked::Request, now);
    let allowed = if tries {
        taken.and_then(|()| app.limits.check(from, Asked::WrongToken, now))
    } else {
        taken
    };
    if let Err(seconds) = allowed {
        return wait(seconds);
    }
    let response = next.run(request).await;
    let refused = bearer && response.status() == StatusCode::UNAUTHORIZED;
    if refused || response.extensions().get::<WrongToken>().is_some() {
        count_wrong(&app, from);
    }
    response
}

fn count_wrong(app: &App, from: IpAddr) {
    let now = app.site.clock.now();
    if app.limits.take(from, Asked::WrongToken, now).is_err() {
        tracing::info!(%from, "wrong tokens come faster than they are taken");
    }
}

fn wait(seconds: u64) -> Response {
    let detail =
        format!("too many requests or wrong tokens from this address; try again in {seconds} s");
    let problem = Problem::new(StatusCode::TOO_MANY_REQUESTS, &detail);
    let mut response = problem.into_response();
    if let Ok(seconds) = HeaderValue::from_str(&seconds.to_string()) {
        response.headers_mut().insert(header::RETRY_AFTER, seconds);
    }
    response
}
