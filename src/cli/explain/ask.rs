//! Asks the running daemon over HTTP.
//!
//! What must hold: only a connection that nobody accepts means that no daemon runs; whatever else goes
//! wrong is told, so that a store in use is never taken for one that is free.

use std::fs;
use std::net::{IpAddr, Ipv4Addr, Ipv6Addr, SocketAddr};
use std::path::{Path, PathBuf};
use std::time::Duration;

use reqwest::redirect;

use crate::model::{Time, address_name};
use crate::settings::connection::no_tls;
use crate::web::wire::ExplanationBody;

/// Working a long window out again takes a second at most.
const ANSWER_WITHIN: Duration = Duration::from_secs(30);

/// What is asked for.
#[derive(Clone, Copy, Debug)]
pub struct Wanted<'a> {
    /// The bank.
    pub bank: &'a str,
    /// At or before when.
    pub at: Option<Time>,
    /// The notice.
    pub notice: Option<&'a str>,
}

/// Why the daemon gave no explanation.
#[derive(Debug, thiserror::Error)]
pub enum AskError {
    /// The token cannot be read.
    #[error("the token file {} cannot be used: {why}", file.display())]
    Token {
        /// The file.
        file: PathBuf,
        /// What is wrong.
        why: String,
    },
    /// The way to the daemon cannot be made.
    #[error("the daemon at {at} cannot be asked: {why}")]
    Way {
        /// Its address.
        at: SocketAddr,
        /// What went wrong.
        why: String,
    },
    /// It answered something else.
    #[error("the daemon at {at} says: {what}")]
    Said {
        /// Its address.
        at: SocketAddr,
        /// Its words.
        what: String,
    },
}

/// Asks; `None` when nothing listens there.
///
/// # Errors
/// When something listens and gives no explanation.
pub fn daemon(
    listen: SocketAddr,
    token_file: Option<&Path>,
    wanted: &Wanted,
) -> Result<Option<ExplanationBody>, AskError> {
    let token = token_file.map(token).transpose()?;
    let at = reachable(listen);
    let way = |why: String| AskError::Way { at, why };
    let runtime = tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build()
        .map_err(|e| way(e.to_string()))?;
    runtime.block_on(ask(at, token.as_deref(), wanted))
}

/// A daemon that listens everywhere is asked on this machine.
fn reachable(listen: SocketAddr) -> SocketAddr {
    let ip = match listen.ip() {
        IpAddr::V4(ip) if ip.is_unspecified() => IpAddr::V4(Ipv4Addr::LOCALHOST),
        IpAddr::V6(ip) if ip.is_unspecified() => IpAddr::V6(Ipv6Addr::LOCALHOST),
        ip => ip,
    };
    SocketAddr::new(ip, listen.port())
}

/// The first token of a file: its last word, after `look` or `act`.
fn token(file: &Path) -> Result<String, AskError> {
    let wrong = |why: String| AskError::Token {
        file: file.to_owned(),
        why,
    };
    let text = fs::read_to_string(file).map_err(|e| wrong(e.to_string()))?;
    let may_look = |line: &&str| !line.trim_start().starts_with("act ");
    let mut lines = text.lines().filter(|l| !l.trim().is_empty());
    let line = lines.find(may_look);
    let token = line.and_then(|l| l.split_whitespace().last());
    let none = || wrong("it holds no token that may look".to_owned());
    token.map(str::to_owned).ok_or_else(none)
}

fn path(wanted: &Wanted) -> String {
    match (wanted.notice, wanted.at) {
        (Some(id), _) => format!("/api/v1/notices/{}/evidence", address_name(id)),
        (None, Some(at)) => format!(
            "/api/v1/banks/{}/explain?at={}",
            address_name(wanted.bank),
            address_name(&at.to_string())
        ),
        (None, None) => format!("/api/v1/banks/{}/explain", address_name(wanted.bank)),
    }
}

async fn ask(
    at: SocketAddr,
    token: Option<&str>,
    wanted: &Wanted<'_>,
) -> Result<Option<ExplanationBody>, AskError> {
    let way = |why: String| AskError::Way { at, why };
    let client = reqwest::Client::builder()
        .tls_backend_preconfigured(no_tls().map_err(|e| way(e.to_string()))?)
        .user_agent(concat!("evenrow/", env!("CARGO_PKG_VERSION")))
        .redirect(redirect::Policy::none())
        .no_proxy()
        .timeout(ANSWER_WITHIN)
        .build()
        .map_err(|e| way(e.to_string()))?;
    let mut request = client.get(format!("http://{at}{}", path(wanted)));
    if let Some(token) = token {
        request = request.bearer_auth(token);
    }
    let response = match request.send().await {
        Ok(response) => response,
        Err(e) if e.is_connect() => return Ok(None),
        Err(e) => return Err(way(e.to_string())),
    };
    let is_good = response.status().is_success();
    let body = response.bytes().await.map_err(|e| way(e.to_string()))?;
    if is_good {
        let read = serde_json::from_slice(&body);
        return read.map(Some).map_err(|e| {
            way(format!(
                "its answer is not understood ({e}); is it another version?"
            ))
        });
    }
    // RFC 9457: the detail says what is wrong and what to do.
    let problem: Option<serde_json::Value> = serde_json::from_slice(&body).ok();
    let detail = problem.as_ref().and_then(|p| p["detail"].as_str());
    Err(AskError::Said {
        at,
        what: detail.unwrap_or("no explanation, and no reason").to_owned(),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_address_says_what_is_wanted() {
        let at = Time::parse_rfc3339("2026-03-01T06:00:00Z").expect("a time");
        for (at, notice, wanted) in [
            (None, None, "/api/v1/banks/tube%20mill/explain"),
            (
                Some(at),
                None,
                "/api/v1/banks/tube%20mill/explain?at=2026-03-01T06%3A00%3A00Z",
            ),
            (
                None,
                Some("f-2026-0001"),
                "/api/v1/notices/f-2026-0001/evidence",
            ),
        ] {
            let asked = Wanted {
                bank: "tube mill",
                at,
                notice,
            };
            assert_eq!(path(&asked), wanted);
        }
    }

    #[test]
    fn a_token_that_may_look_is_taken() {
        let folder = tempfile::tempdir().expect("a folder");
        let file = folder.path().join("tokens");
        for (text, wanted) in [
            ("act green\nlook blue\n", Some("blue")),
            ("\nred\n", Some("red")),
            ("act green\n", None),
            ("", None),
        ] {
            fs::write(&file, text).expect("written");
            assert_eq!(token(&file).ok().as_deref(), wanted, "{text:?}");
        }
    }
}
