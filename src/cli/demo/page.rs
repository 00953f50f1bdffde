//! Speaks with the demo's own page: whether the daemon is ready, what it has taken in, and what the
//! demo's fitter enters.
//!
//! Deliberately absent: a web client; a few plain requests to our own loopback address are all that is
//! needed.

use std::io;
use std::net::SocketAddr;
use std::time::Duration;

use tokio::io::{AsyncReadExt, AsyncWriteExt};
use tokio::net::TcpStream;
use tokio::time::timeout;

/// No answer of ours is longer; it keeps a stray program on the port from filling memory.
const MOST_BYTES: u64 = 4 << 20;
/// How long one answer may take.
const ANSWER_WITHIN: Duration = Duration::from_secs(5);

/// Whether the store is recovered and every subscription confirmed.
pub async fn is_ready(page: SocketAddr) -> bool {
    let answer = get(page, "/health/ready").await;
    answer.is_ok_and(|text| status(&text) == Some(200))
}

/// Measurements that have come through, accepted or not; `None` when the page does not answer.
pub async fn taken_in(page: SocketAddr) -> Option<u64> {
    let text = get(page, "/metrics").await.ok()?;
    (status(&text) == Some(200)).then(|| measurements(&text))
}

/// Enters something with a token; says whether it was taken.
pub async fn enter(page: SocketAddr, path: &str, token: &str, json: &str) -> bool {
    let request = format!(
        "POST {path} HTTP/1.0\r\nHost: {page}\r\nAuthorization: Bearer {token}\r\n\
         Content-Type: application/json\r\nContent-Length: {}\r\n\r\n{json}",
        json.len()
    );
    let answer = exchange(page, &request).await;
    answer.is_ok_and(|text| status(&text) == Some(201))
}

async fn get(page: SocketAddr, path: &str) -> io::Result<String> {
    exchange(
        page,
        &format!("GET {path} HTTP/1.0\r\nHost: {page}\r\n\r\n"),
    )
    .await
}

/// One request and its whole answer. HTTP/1.0 asks for a body in one piece.
async fn exchange(page: SocketAddr, request: &str) -> io::Result<String> {
    let exchange = async {
        let mut stream = TcpStream::connect(page).await?;
        stream.write_all(request.as_bytes()).await?;
        let mut answer = Vec::new();
        stream.take(MOST_BYTES).read_to_end(&mut answer).await?;
        Ok(String::from_utf8_lossy(&answer).into_owned())
    };
    timeout(ANSWER_WITHIN, exchange).await?
}

/// The status code of an answer.
fn status(answer: &str) -> Option<u16> {
    answer.split_whitespace().nth(1)?.parse().ok()
}

/// The sum of `evenrow_measurements_total` over banks and outcomes.
fn measurements(metrics: &str) -> u64 {
    let count = |line: &str| -> Option<f64> { line.rsplit(' ').next()?.parse().ok() };
    let lines = metrics.lines();
    let ours = lines.filter(|l| l.starts_with("evenrow_measurements_total{"));
    ours.filter_map(count).sum::<f64>() as u64
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn counts_are_summed_over_outcomes() {
        let text = "HTTP/1.0 200 OK\r\n\r\n# HELP evenrow_measurements_total x\n\
            evenrow_measurements_total{bank=\"a\",outcome=\"accepted\"} 1200\n\
            evenrow_measurements_total{bank=\"a\",outcome=\"double\"} 3\n\
            evenrow_window_values{bank=\"a\",source=\"01\"} 640\n";
        assert_eq!(status(text), Some(200));
        assert_eq!(measurements(text), 1_203);
        assert_eq!(measurements(""), 0);
        assert_eq!(status(""), None);
    }
}
