//! A receiver of webhooks that keeps what it got and answers as it is told.

use std::collections::VecDeque;
use std::io::{Read, Write};
use std::net::TcpListener as BlockingListener;
use std::path::Path;
use std::sync::{Arc, Mutex};
use std::time::{Duration, Instant};

use axum::Router;
use axum::body::Bytes;
use axum::extract::State;
use axum::http::{HeaderMap, HeaderName, HeaderValue, StatusCode};
use axum::response::{IntoResponse, Response};
use base64::Engine as _;
use base64::engine::general_purpose::STANDARD;
use hmac::{Hmac, KeyInit, Mac};
use rustls::pki_types::pem::PemObject;
use rustls::pki_types::{CertificateDer, PrivateKeyDer};
use serde_json::Value;
use tokio::net::TcpListener;

use crate::common::desk;

/// What came.
#[derive(Clone, Debug)]
pub struct Request {
    pub at: Instant,
    pub headers: HeaderMap,
    pub body: Vec<u8>,
}

/// What is answered.
#[derive(Clone, Debug)]
pub struct Answer {
    pub status: u16,
    pub header: Option<(&'static str, String)>,
    pub body: &'static str,
    pub after: Duration,
}

/// An answer at once, without anything in it.
pub fn plain(status: u16) -> Answer {
    Answer {
        status,
        header: None,
        body: "",
        after: Duration::ZERO,
    }
}

/// Answers one after the other, and 204 when there are no more.
#[derive(Clone, Default)]
pub struct Receiver {
    seen: Arc<Mutex<Vec<Request>>>,
    answers: Arc<Mutex<VecDeque<Answer>>>,
}

impl Receiver {
    /// Starts one on a free port; gives its address.
    pub async fn start(answers: impl IntoIterator<Item = Answer>) -> (Self, String) {
        let receiver = Self::default();
        receiver.answers.lock().expect("whole").extend(answers);
        let listener = TcpListener::bind("127.0.0.1:0").await.expect("a port");
        let address = listener.local_addr().expect("bound");
        let router = Router::new().fallback(take).with_state(receiver.clone());
        tokio::spawn(async move { axum::serve(listener, router).await });
        (receiver, format!("http://{address}/notices"))
    }

    /// What came so far.
    pub fn seen(&self) -> Vec<Request> {
        self.seen.lock().expect("whole").clone()
    }
}

async fn take(State(receiver): State<Receiver>, headers: HeaderMap, body: Bytes) -> Response {
    let at = Instant::now();
    let body = body.to_vec();
    let request = Request { at, headers, body };
    receiver.seen.lock().expect("whole").push(request);
    let next = receiver.answers.lock().expect("whole").pop_front();
    let answer = next.unwrap_or_else(|| plain(204));
    tokio::time::sleep(answer.after).await;
    let status = StatusCode::from_u16(answer.status).expect("a status");
    let mut response = (status, answer.body).into_response();
    if let Some((name, value)) = answer.header {
        let value = HeaderValue::from_str(&value).expect("a value");
        response
            .headers_mut()
            .insert(HeaderName::from_static(name), value);
    }
    response
}

impl Request {
    pub fn header(&self, name: &str) -> &str {
        let value = self.headers.get(name);
        value.map_or("", |v| v.to_str().expect("text"))
    }

    pub fn json(&self) -> Value {
        serde_json::from_slice(&self.body).expect("JSON")
    }

    /// Whether one of the signatures is made with this secret (without its prefix).
    pub fn is_signed_with(&self, secret: &str) -> bool {
        let key = STANDARD.decode(secret).expect("base64");
        let mut mac = Hmac::<sha2::Sha256>::new_from_slice(&key).expect("any length");
        let (id, timestamp) = (self.header("webhook-id"), self.header("webhook-timestamp"));
        mac.update(&[id.as_bytes(), b".", timestamp.as_bytes(), b".", &self.body].concat());
        let wanted = format!("v1,{}", STANDARD.encode(mac.finalize().into_bytes()));
        let mut signatures = self.header("webhook-signature").split(' ');
        signatures.any(|s| s == wanted)
    }
}

/// A receiver over TLS with the certificate in this folder, which takes `times` requests; gives its
/// port.
pub fn encrypted(folder: &Path, times: usize) -> u16 {
    let chain = CertificateDer::pem_file_iter(folder.join("broker.pem")).expect("a file");
    let chain: Result<Vec<_>, _> = chain.collect();
    let key = PrivateKeyDer::from_pem_file(folder.join("broker.key")).expect("a key");
    let provider = Arc::new(rustls::crypto::ring::default_provider());
    let config = rustls::ServerConfig::builder_with_provider(provider)
        .with_safe_default_protocol_versions()
        .expect("versions")
        .with_no_client_auth()
        .with_single_cert(chain.expect("certificates"), key)
        .expect("they fit");
    let listener = BlockingListener::bind("127.0.0.1:0").expect("a port");
    let port = listener.local_addr().expect("bound").port();
    let config = Arc::new(config);
    std::thread::spawn(move || {
        for _ in 0..times {
            let (stream, _) = listener.accept().expect("a client");
            let session = rustls::ServerConnection::new(Arc::clone(&config)).expect("a session");
            // A client that does not trust us breaks off, which is its right.
            let _ = answer(rustls::StreamOwned::new(session, stream));
        }
    });
    port
}

/// Reads one request whole and answers it.
fn answer(mut stream: impl Read + Write) -> std::io::Result<()> {
    desk::Request::read(&mut stream)?;
    stream.write_all(b"HTTP/1.1 204 No Content\r\nconnection: close\r\n\r\n")?;
    stream.flush()
}
