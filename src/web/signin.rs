//! Signing in and out: the token is entered once, then a cookie stands for it.
//!
//! The cookie is `HttpOnly` and `SameSite=Strict`, and `Secure` where connections are encrypted.
//! The sign-in form carries a one-time field that must equal a second cookie made with it: there is
//! no session yet that could hold it.

use std::time::Duration;

use axum::Form;
use axum::extract::{Query, State};
use axum::http::{HeaderMap, HeaderName, header};
use axum::response::{IntoResponse, Redirect, Response};
use serde::Deserialize;

use super::access::{NO_TOKEN_FILE, cookie, from_elsewhere};
use super::address::local;
use super::pages;
use super::problem::Problem;
use super::sessions::{self, LASTS_US};
use super::site::App;

/// A wrong token costs this much time, so that guessing is slow.
const WRONG_TOKEN_PAUSE: Duration = Duration::from_millis(300);
/// How long an opened sign-in form is good for, in seconds.
const FORM_LASTS_S: u32 = 3600;

/// Marks the answer to a wrong token, for whoever counts them.
#[derive(Clone, Copy, Debug)]
pub struct WrongToken;

/// Where to go afterwards.
#[derive(Debug, Default, Deserialize)]
pub struct Wanted {
    #[serde(default)]
    next: String,
}

/// The filled form.
#[derive(Deserialize)]
pub struct Entered {
    token: String,
    field: String,
    #[serde(default)]
    next: String,
}

/// The form that ends a session.
#[derive(Deserialize)]
pub struct Leaving {
    field: String,
}

/// The form.
pub async fn form(State(app): State<App>, Query(wanted): Query<Wanted>) -> Response {
    show(&app, &local(&wanted.next), None)
}

fn show(app: &App, next: &str, complaint: Option<&str>) -> Response {
    if app.tokens.is_none() {
        return Problem::forbidden(NO_TOKEN_FILE).into_response();
    }
    let field = match sessions::random_text() {
        Ok(field) => field,
        Err(error) => return Problem::internal(&error.to_string()).into_response(),
    };
    let body = pages::signin::form(app, &field, next, complaint);
    let set = set_cookie(app, &form_cookie(app), &field, FORM_LASTS_S);
    ([set], body).into_response()
}

/// Takes the token.
pub async fn enter(
    State(app): State<App>,
    headers: HeaderMap,
    Form(entered): Form<Entered>,
) -> Response {
    if from_elsewhere(&headers) {
        return Problem::forbidden("this form was sent by another site's page").into_response();
    }
    let next = local(&entered.next);
    let expected = cookie(&headers, &form_cookie(&app));
    if !expected.is_some_and(|e| sessions::same(e, &entered.field)) {
        return show(
            &app,
            &next,
            Some("This form was too old. Please enter the token again."),
        );
    }
    let rights = app
        .tokens
        .as_ref()
        .and_then(|t| t.rights(entered.token.trim()));
    let Some(rights) = rights else {
        tokio::time::sleep(WRONG_TOKEN_PAUSE).await;
        let complaint = "This token is not known. It stands in the token file.";
        let mut again = show(&app, &next, Some(complaint));
        again.extensions_mut().insert(WrongToken);
        return again;
    };
    match app.sessions.start(rights, app.site.clock.now()) {
        Ok(id) => {
            let lasts_s = u32::try_from(LASTS_US / crate::model::US_PER_S).unwrap_or(0);
            let set = set_cookie(&app, &app.cookie, &id, lasts_s);
            ([set], Redirect::to(&next)).into_response()
        }
        Err(error) => Problem::internal(&error.to_string()).into_response(),
    }
}

/// Ends the session.
pub async fn leave(
    State(app): State<App>,
    headers: HeaderMap,
    Form(leaving): Form<Leaving>,
) -> Response {
    let now = app.site.clock.now();
    let id = cookie(&headers, &app.cookie).unwrap_or_default();
    let Some((_, field)) = app.sessions.find(id, now) else {
        return Redirect::to("/").into_response();
    };
    if from_elsewhere(&headers) || !sessions::same(&field, &leaving.field) {
        return Problem::forbidden("this form was too old; go back, load the page again and retry")
            .into_response();
    }
    app.sessions.end(id, now);
    let set = set_cookie(&app, &app.cookie, "", 0);
    ([set], Redirect::to("/")).into_response()
}

fn form_cookie(app: &App) -> String {
    format!("{}_form", app.cookie)
}

fn set_cookie(app: &App, name: &str, text: &str, lasts_s: u32) -> (HeaderName, String) {
    let web = &app.site.settings.web;
    let secure = if web.tls_in_front || web.certificate_file.is_some() {
        "; Secure"
    } else {
        ""
    };
    let text =
        format!("{name}={text}; Path=/; Max-Age={lasts_s}; HttpOnly; SameSite=Strict{secure}");
    (header::SET_COOKIE, text)
}
