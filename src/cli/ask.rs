//! Asks the running daemon of a configuration by HTTP.
//!
//! What must hold: that no daemon runs (nobody listens) is told apart from every other failure, because
//! only then a command may open the store itself.

use std::io;
use std::path::Path;
use std::time::Duration;

use crate::settings::Settings;
use crate::settings::connection::{no_tls, server_tls};

/// Longer than the daemon takes for any answer.
const ANSWER_WITHIN: Duration = Duration::from_secs(30);

/// What came of asking.
pub enum Asked {
    /// The answer's body.
    Answer(String),
    /// Nobody listens where this configuration's daemon would.
    NobodyThere,
}

/// Why there is no answer.
#[derive(Debug, thiserror::Error)]
pub enum AskError {
    /// The token file.
    #[error("the token file {file} cannot be read: {why}")]
    Token {
        /// The file.
        file: String,
        /// What the system says.
        why: io::Error,
    },
    /// The client or the way.
    #[error("the daemon on {at} cannot be asked: {why}")]
    Way {
        /// Where.
        at: String,
        /// What went wrong.
        why: String,
    },
    /// The daemon said no.
    #[error("the daemon on {at} answered {status}: {what}")]
    Refused {
        /// Where.
        at: String,
        /// The status.
        status: u16,
        /// What it says is wrong.
        what: String,
    },
}

/// Asks for a path of the interface, with the first token of the file that may look.
///
/// # Errors
/// [`AskError`].
pub fn ask(settings: &Settings, token_file: Option<&Path>, path: &str) -> Result<Asked, AskError> {
    let mut to = settings.web.listen;
    if to.ip().is_unspecified() {
        to.set_ip(std::net::Ipv4Addr::LOCALHOST.into());
    }
    let at = to.to_string();
    let way = |why: String| AskError::Way {
        at: at.clone(),
        why,
    };
    let token = token_file.map(token).transpose()?.flatten();
    let runtime = tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build()
        .map_err(|e| way(e.to_string()))?;
    // With a certificate the name in it counts, so the address that people use is asked.
    let certificate = settings.web.certificate_file.as_deref();
    let url = match certificate {
        Some(_) => format!("{}{path}", settings.pages()),
        None => format!("http://{at}{path}"),
    };
    runtime.block_on(async {
        // Whether anybody listens is asked first: the client's errors do not tell it apart for sure.
        match tokio::net::TcpStream::connect(to).await {
            Ok(_) => {}
            Err(e) if e.kind() == io::ErrorKind::ConnectionRefused => {
                return Ok(Asked::NobodyThere);
            }
            Err(e) => return Err(way(e.to_string())),
        }
        let tls = match certificate {
            Some(own) => server_tls(Some(own)),
            None => no_tls(),
        };
        let tls = tls.map_err(|e| way(e.to_string()))?;
        let client = reqwest::Client::builder()
            .tls_backend_preconfigured(tls)
            .no_proxy()
            .timeout(ANSWER_WITHIN)
            .build()
            .map_err(|e| way(e.to_string()))?;
        let mut request = client.get(url);
        if let Some(token) = &token {
            request = request.bearer_auth(token);
        }
        let response = request.send().await.map_err(|e| way(e.to_string()))?;
        let status = response.status();
        let body = response.text().await.map_err(|e| way(e.to_string()))?;
        if status.is_success() {
            return Ok(Asked::Answer(body));
        }
        Err(AskError::Refused {
            at: at.clone(),
            status: status.as_u16(),
            what: detail(&body),
        })
    })
}

/// The sentence of a problem (RFC 9457), else the body's beginning.
fn detail(body: &str) -> String {
    let read: Option<serde_json::Value> = serde_json::from_str(body).ok();
    let told = read.and_then(|v| Some(v.get("detail")?.as_str()?.to_owned()));
    told.unwrap_or_else(|| body.chars().take(200).collect())
}

fn token(file: &Path) -> Result<Option<String>, AskError> {
    let text = std::fs::read_to_string(file).map_err(|why| AskError::Token {
        file: file.display().to_string(),
        why,
    })?;
    let mut lines = text.lines().map(str::trim).filter(|l| !l.is_empty());
    let looks = lines.find(|l| !l.starts_with("act "));
    Ok(looks.map(|l| l.strip_prefix("look ").unwrap_or(l).trim().to_owned()))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_sentence_of_a_problem_is_what_people_read() {
        assert_eq!(detail(r#"{"detail": "no such shift"}"#), "no such shift");
        assert_eq!(detail("gateway"), "gateway");
    }

    #[test]
    fn the_first_token_that_may_look_is_taken() {
        let folder = tempfile::tempdir().expect("a folder");
        let file = folder.path().join("tokens");
        for (text, wanted) in [
            ("act a\nlook b\nc\n", Some("b")),
            ("\n  c \n", Some("c")),
            ("act a\n", None),
        ] {
            std::fs::write(&file, text).expect("written");
            assert_eq!(token(&file).expect("read").as_deref(), wanted);
        }
        assert!(token(&folder.path().join("none")).is_err());
    }
}
