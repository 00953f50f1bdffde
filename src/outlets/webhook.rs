//! Notices to a web server: CloudEvents in structured mode, signed as Standard Webhooks.
//!
//! Secrets and authorities are read anew for each attempt, so renewing them needs no restart.
//! Deliberately absent: proxies, which the environment could set unseen, and redirects, which would
//! take plant data to an address that nobody configured.

use std::error::Error;
use std::time::Duration;

use reqwest::header::{CONTENT_TYPE, HeaderMap, RETRY_AFTER};
use reqwest::{Client, Response, StatusCode, redirect};

use crate::clock::Clock;
use crate::model::{Time, US_PER_S};
use crate::settings::connection::{no_tls, server_tls};
use crate::settings::{Outlet, Webhook};

use super::cloud_event;
use super::letter::Letter;
use super::postman::{Carrier, Failure, Then};
use super::sign;

/// Of what a receiver answers to what it does not take, so much is told.
const MOST_SAID: usize = 200;

/// Takes letters to a receiver.
pub struct WebhookCarrier {
    webhook: Webhook,
    time_limit: Duration,
    clock: Clock,
}

impl WebhookCarrier {
    /// For this receiver.
    pub fn new(outlet: &Outlet, webhook: &Webhook) -> Self {
        Self {
            webhook: webhook.clone(),
            time_limit: outlet.time_limit,
            clock: Clock::System,
        }
    }

    fn client(&self) -> Result<Client, Failure> {
        let tls = if self.webhook.url.starts_with("https://") {
            server_tls(self.webhook.ca_file.as_deref())
        } else {
            no_tls()
        };
        let builder = Client::builder()
            .tls_backend_preconfigured(tls.map_err(|e| Failure::new(e.to_string()))?)
            .user_agent(concat!("evenrow/", env!("CARGO_PKG_VERSION")))
            .redirect(redirect::Policy::none())
            .no_proxy()
            .timeout(self.time_limit);
        builder.build().map_err(|e| Failure::new(said(&e)))
    }
}

impl Carrier for WebhookCarrier {
    async fn carry(&self, letter: &Letter) -> Result<(), Failure> {
        let secrets =
            sign::secrets(&self.webhook.secret_file).map_err(|e| Failure::new(e.to_string()))?;
        let client = self.client()?;
        let (id, body) = (letter.id(), letter.event());
        let now = self.clock.now();
        let timestamp_s = now.us().div_euclid(US_PER_S);
        let signatures = sign::signatures(&secrets, &id, timestamp_s, &body);
        let request = client
            .post(&self.webhook.url)
            .header(CONTENT_TYPE, cloud_event::CONTENT_TYPE)
            .header("webhook-id", id)
            .header("webhook-timestamp", timestamp_s)
            .header("webhook-signature", signatures)
            .body(body);
        let response = request.send().await;
        let response = response.map_err(|e| Failure::new(self.unreachable(&e)))?;
        judge(response, now).await
    }
}

impl WebhookCarrier {
    fn unreachable(&self, error: &reqwest::Error) -> String {
        if error.is_timeout() {
            return format!("the receiver did not answer within {:?}", self.time_limit);
        }
        format!("the receiver cannot be reached: {}", said(error))
    }
}

/// An error with what lies behind it, without the address, which may hold a secret path.
fn said(error: &dyn Error) -> String {
    let mut all = Vec::new();
    let mut next = error.source();
    while let Some(source) = next {
        let text = source.to_string();
        if !all.contains(&text) {
            all.push(text);
        }
        next = source.source();
    }
    if all.is_empty() {
        return error.to_string();
    }
    all.join(": ")
}

/// What an answer means.
async fn judge(response: Response, now: Time) -> Result<(), Failure> {
    let status = response.status();
    if status.is_success() {
        return Ok(());
    }
    if status == StatusCode::GONE {
        return Err(Failure {
            why: "the receiver answered 410 (gone): it wants no more notices, and none are sent \
                  until evenrow is started again; take the outlet out of the configuration, or put \
                  its `url` right"
                .to_owned(),
            then: Then::Close,
        });
    }
    let is_busy = matches!(
        status,
        StatusCode::TOO_MANY_REQUESTS | StatusCode::SERVICE_UNAVAILABLE
    );
    let then = match retry_after(response.headers(), now) {
        Some(wait) if is_busy => Then::Quiet(wait),
        _ => Then::Retry,
    };
    let why = if status.is_redirection() {
        format!(
            "the receiver answered {status} and points elsewhere, where notices are not taken; put \
             the final address into `url`"
        )
    } else {
        format!("the receiver answered {status}{}", excerpt(response).await)
    };
    Err(Failure { why, then })
}

/// How long the other side wants to be left alone (RFC 9110, 10.2.3): seconds, or a date.
fn retry_after(headers: &HeaderMap, now: Time) -> Option<Duration> {
    let text = headers.get(RETRY_AFTER)?.to_str().ok()?.trim();
    if let Ok(seconds) = text.parse() {
        return Some(Duration::from_secs(seconds));
    }
    let date = jiff::fmt::rfc2822::DateTimeParser::new()
        .relaxed_weekday(true)
        .parse_timestamp(text)
        .ok()?;
    Some(Time::from_us(date.as_microsecond()).wait_from(now))
}

/// The beginning of what the receiver says, on one line.
async fn excerpt(mut response: Response) -> String {
    let mut bytes = Vec::new();
    while bytes.len() < MOST_SAID {
        match response.chunk().await {
            Ok(Some(chunk)) => bytes.extend_from_slice(&chunk),
            Ok(None) | Err(_) => break,
        }
    }
    let text = String::from_utf8_lossy(&bytes);
    let plain = |c: char| if c.is_control() { ' ' } else { c };
    let line: String = text.trim().chars().take(MOST_SAID).map(plain).collect();
    if line.is_empty() {
        return String::new();
    }
    format!(", saying \"{line}\"")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_wait_is_read_in_seconds_or_as_a_date() {
        let now = Time::parse_rfc3339("2026-01-07T08:00:00Z").expect("a time");
        for (text, wanted) in [
            ("120", Some(120)),
            ("Wed, 07 Jan 2026 08:01:30 GMT", Some(90)),
            ("Wed, 07 Jan 2026 07:00:00 GMT", Some(0)),
            ("soon", None),
            ("-3", None),
        ] {
            let mut headers = HeaderMap::new();
            headers.insert(RETRY_AFTER, text.parse().expect("a header"));
            let wait = retry_after(&headers, now);
            assert_eq!(wait, wanted.map(Duration::from_secs), "{text}");
        }
        assert_eq!(retry_after(&HeaderMap::new(), now), None);
    }
}
