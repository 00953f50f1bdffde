//! Who may do what: the rules of tokens as one layer in front of every route that needs them.
//!
//! | | looking on loopback | looking from beyond | changing |
//! | --- | --- | --- | --- |
//! | no token file | free | refused | refused with a hint |
//! | token file | free | needs `look` | needs `act` |
//!
//! Health, sign-in and the embedded files are not behind this layer. What must hold: a wrong token is
//! refused even where none is needed, so that nobody believes it works; the interface takes changes by
//! token only, never by cookie; requests that another site's page started change nothing.

use axum::extract::{Request, State};
use axum::http::{HeaderMap, Method, header};
use axum::middleware::Next;
use axum::response::{IntoResponse, Redirect, Response};

use super::address;
use super::problem::{Problem, wants_page};
use super::site::{App, Reach};
use super::tokens::Rights;

/// Said whenever a change is asked for and there is no token file.
pub const NO_TOKEN_FILE: &str = "changes need a token and this evenrow has no token file: set \
    `token_file` under [web] to a file with one token per line, then start it again";

/// Who asks, for the handlers.
#[derive(Clone, Debug, Default)]
pub struct Caller {
    /// What they may.
    pub rights: Rights,
    /// Their session, when they came by cookie.
    pub session: Option<SessionPass>,
}

/// A live session of the caller.
#[derive(Clone, Debug)]
pub struct SessionPass {
    /// Its id.
    pub id: String,
    /// The one-time field for the next form.
    pub field: String,
}

/// Lets through who may.
pub async fn guard(State(app): State<App>, mut request: Request, next: Next) -> Response {
    match examine(&app, &request) {
        Ok(caller) => {
            request.extensions_mut().insert(caller);
            next.run(request).await
        }
        Err(problem) => {
            let path = request.uri().path();
            let get = matches!(*request.method(), Method::GET | Method::HEAD);
            if get && problem.status == 401 && wants_page(path, request.headers()) {
                let back = address::sign_in_from(request.uri());
                return Redirect::to(&back).into_response();
            }
            problem.into_response()
        }
    }
}

fn examine(app: &App, request: &Request) -> Result<Caller, Problem> {
    let headers = request.headers();
    let api = request.uri().path().starts_with("/api/");
    let changes = !matches!(
        *request.method(),
        Method::GET | Method::HEAD | Method::OPTIONS
    );
    if changes && from_elsewhere(headers) {
        return Err(Problem::forbidden(
            "this request was started by another site's page",
        ));
    }
    let bearer = bearer(headers);
    if let (Some(tokens), Some(token)) = (&app.tokens, bearer) {
        let rights = tokens.rights(token);
        let rights = rights.ok_or_else(|| Problem::unauthorized("this token is not known"))?;
        let caller = Caller {
            rights,
            session: None,
        };
        return admit(app, caller, changes);
    }
    let caller = by_cookie(app, headers);
    if changes && api && app.tokens.is_some() {
        return Err(Problem::unauthorized(
            "changes by the interface need a token: send it as `Authorization: Bearer …`",
        ));
    }
    admit(app, caller, changes)
}

fn admit(app: &App, caller: Caller, changes: bool) -> Result<Caller, Problem> {
    let has_file = app.tokens.is_some();
    if changes {
        return match (has_file, caller.rights) {
            (false, _) => Err(Problem::forbidden(NO_TOKEN_FILE)),
            (true, Rights { act: true, .. }) => Ok(caller),
            (true, Rights { look: true, .. }) => Err(Problem::forbidden(
                "this token may only look; changes need one that may act",
            )),
            (true, _) => Err(Problem::unauthorized("changes need a token: sign in first")),
        };
    }
    match (app.reach, has_file, caller.rights) {
        (Reach::Loopback, _, _) | (Reach::Beyond, true, Rights { look: true, .. }) => Ok(caller),
        (Reach::Beyond, false, _) => Err(Problem::forbidden(
            "other machines can reach this evenrow and it has no token file, so it shows nothing: \
             set `token_file` under [web], or listen on a loopback address",
        )),
        (Reach::Beyond, true, Rights { act: true, .. }) => Err(Problem::forbidden(
            "this token may act but not look; looking needs another one",
        )),
        (Reach::Beyond, true, _) => Err(Problem::unauthorized(
            "looking needs a token here: send it as `Authorization: Bearer …`, or sign in",
        )),
    }
}

fn bearer(headers: &HeaderMap) -> Option<&str> {
    let text = headers.get(header::AUTHORIZATION)?.to_str().ok()?;
    let (scheme, token) = text.split_once(' ')?;
    scheme.eq_ignore_ascii_case("bearer").then(|| token.trim())
}

fn by_cookie(app: &App, headers: &HeaderMap) -> Caller {
    let id = cookie(headers, &app.cookie);
    let found = id.and_then(|id| {
        let (rights, field) = app.sessions.find(id, app.site.clock.now())?;
        let id = id.to_owned();
        Some((rights, SessionPass { id, field }))
    });
    match found {
        Some((rights, pass)) => Caller {
            rights,
            session: Some(pass),
        },
        None => Caller::default(),
    }
}

/// A cookie's text by name.
pub fn cookie<'a>(headers: &'a HeaderMap, name: &str) -> Option<&'a str> {
    let all = headers.get_all(header::COOKIE).into_iter();
    let pairs = all
        .filter_map(|h| h.to_str().ok())
        .flat_map(|h| h.split(';'));
    pairs
        .filter_map(|pair| pair.trim().split_once('='))
        .find_map(|(key, text)| (key == name).then_some(text))
}

/// Whether a browser says that another site's page started this request.
pub fn from_elsewhere(headers: &HeaderMap) -> bool {
    let text = |name: &str| headers.get(name).and_then(|h| h.to_str().ok());
    if let Some(site) = text("sec-fetch-site") {
        return !matches!(site, "same-origin" | "none");
    }
    match (text("origin"), text("host")) {
        (Some(origin), Some(host)) => {
            let origin_host = origin.split_once("://").map_or(origin, |(_, rest)| rest);
            !origin_host.eq_ignore_ascii_case(host)
        }
        _ => false,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn headers(pairs: &[(&'static str, &'static str)]) -> HeaderMap {
        let pairs = pairs.iter();
        pairs
            .map(|(k, v)| {
                (
                    header::HeaderName::from_static(k),
                    header::HeaderValue::from_static(v),
                )
            })
            .collect()
    }

    #[test]
    fn other_sites_are_recognised() {
        for (pairs, elsewhere) in [
            (&[("host", "a:1")][..], false),
            (&[("host", "a:1"), ("origin", "http://a:1")], false),
            (&[("host", "a:1"), ("origin", "http://b:1")], true),
            (&[("host", "a:1"), ("origin", "null")], true),
            (&[("sec-fetch-site", "same-origin")], false),
            (&[("sec-fetch-site", "cross-site")], true),
            (&[("sec-fetch-site", "same-site")], true),
        ] {
            assert_eq!(from_elsewhere(&headers(pairs)), elsewhere, "{pairs:?}");
        }
    }

    #[test]
    fn cookies_and_bearers_are_found() {
        let some = headers(&[
            ("cookie", "a=1; evenrow_7=xyz"),
            ("authorization", "bearer  tok"),
        ]);
        assert_eq!(cookie(&some, "evenrow_7"), Some("xyz"));
        assert_eq!(cookie(&some, "evenrow"), None);
        assert_eq!(bearer(&some), Some("tok"));
        assert_eq!(bearer(&headers(&[("authorization", "Basic abc")])), None);
    }
}
