//! Asking the daemon, Prometheus and the browser's driver over HTTP.

use std::time::Duration;

use serde_json::Value;

/// An answer, whatever its status.
pub struct Answer {
    /// The status code.
    pub status: u16,
    /// The body as text.
    pub text: String,
}

impl Answer {
    /// The body as JSON.
    #[track_caller]
    pub fn json(&self) -> Value {
        serde_json::from_str(&self.text)
            .unwrap_or_else(|e| panic!("no JSON ({e}) with status {}: {}", self.status, self.text))
    }
}

fn agent() -> ureq::Agent {
    ureq::Agent::config_builder()
        .http_status_as_error(false)
        .timeout_global(Some(Duration::from_secs(30)))
        .build()
        .into()
}

fn answer(result: Result<ureq::http::Response<ureq::Body>, ureq::Error>) -> Result<Answer, String> {
    let mut response = result.map_err(|e| e.to_string())?;
    let status = response.status().as_u16();
    let text = response
        .body_mut()
        .read_to_string()
        .map_err(|e| e.to_string())?;
    Ok(Answer { status, text })
}

/// Asks for an address.
///
/// # Errors
/// When nobody answers.
pub fn get(address: &str) -> Result<Answer, String> {
    answer(agent().get(address).call())
}

/// Sends JSON, with a token where one is given.
///
/// # Errors
/// When nobody answers.
pub fn post(address: &str, token: Option<&str>, body: &Value) -> Result<Answer, String> {
    let request = agent().post(address);
    let request = match token {
        Some(token) => request.header("authorization", format!("Bearer {token}")),
        None => request,
    };
    answer(request.send_json(body))
}

/// Asks for something to be deleted.
///
/// # Errors
/// When nobody answers.
pub fn delete(address: &str) -> Result<Answer, String> {
    answer(agent().delete(address).call())
}
