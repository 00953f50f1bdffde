//! The real server on a real port.

use std::sync::Arc;
use std::time::Duration;

use tokio::io::{AsyncReadExt as _, AsyncWriteExt as _};
use tokio::net::{TcpListener, TcpStream};
use tokio_util::sync::CancellationToken;

use crate::engine::Condition;
use crate::web::sample;
use crate::web::serve;

use super::{settings, site};

/// Set to a number of seconds to look at the sample plant in a browser meanwhile.
const SHOW: &str = "EVENROW_SHOW_S";
/// Where, then.
const SHOW_AT: &str = "EVENROW_SHOW_AT";

#[tokio::test]
async fn a_live_stream_tells_of_changes_and_ends_with_the_shutdown() {
    let folder = tempfile::tempdir().expect("a folder");
    let tokens = folder.path().join("tokens");
    std::fs::write(&tokens, "both-token\n").expect("written");
    let at = std::env::var(SHOW_AT).unwrap_or_else(|_| "127.0.0.1:0".to_owned());
    let listener = TcpListener::bind(at).await.expect("a port");
    let local = listener.local_addr().expect("an address");
    let (site, snapshot) = site(settings(Some(tokens)));
    let shutdown = CancellationToken::new();
    let serving = tokio::spawn(serve(listener, site, shutdown.clone()));

    if let Some(seconds) = std::env::var(SHOW).ok().and_then(|s| s.parse::<u64>().ok()) {
        eprintln!("the sample plant is at http://{local}");
        for second in 0..seconds {
            let mut now = sample::snapshot();
            now.version = second;
            if second % 8 > 3 {
                now.broker = Condition::Trouble("shown for a few seconds, to be looked at".into());
            }
            snapshot.send_replace(Arc::new(now));
            tokio::time::sleep(Duration::from_secs(1)).await;
        }
        snapshot.send_replace(Arc::new(sample::snapshot()));
    }

    let mut viewer = TcpStream::connect(local).await.expect("connected");
    let ask = "GET /live?bank=filler-2 HTTP/1.1\r\nHost: x\r\n\r\n";
    viewer.write_all(ask.as_bytes()).await.expect("sent");
    let head = read_until(&mut viewer, "text/event-stream").await;
    assert!(head.starts_with("HTTP/1.1 200"), "{head}");
    // Another version with the same bank inside is no change for this stream; another bank is.
    let mut next = sample::snapshot();
    next.banks.clone_from(&snapshot.borrow().banks);
    next.version = 2;
    snapshot.send_replace(Arc::new(next));
    tokio::time::sleep(Duration::from_millis(100)).await;
    let mut next = sample::snapshot();
    next.version = 3;
    snapshot.send_replace(Arc::new(next));
    let told = read_until(&mut viewer, "data: ").await;
    assert!(
        told.contains("event: changed") && told.contains("data: 3"),
        "{told}"
    );

    shutdown.cancel();
    let ended = tokio::time::timeout(Duration::from_secs(4), serving).await;
    assert!(matches!(ended, Ok(Ok(Ok(())))), "{ended:?}");
}

async fn read_until(viewer: &mut TcpStream, wanted: &str) -> String {
    let mut text = String::new();
    let mut buffer = [0_u8; 1024];
    let reading = async {
        while !text.contains(wanted) {
            match viewer.read(&mut buffer).await {
                Ok(n) if n > 0 => text.push_str(&String::from_utf8_lossy(&buffer[..n])),
                _ => break,
            }
        }
    };
    tokio::time::timeout(Duration::from_secs(5), reading)
        .await
        .expect("in time");
    text
}

/// One request over TLS that trusts this certificate, and what came back.
fn ask_encrypted(at: std::net::SocketAddr, trusted: &rcgen::Certificate) -> String {
    use std::io::{Read as _, Write as _};
    let mut roots = rustls::RootCertStore::empty();
    roots.add(trusted.der().clone()).expect("a certificate");
    let provider = Arc::new(rustls::crypto::ring::default_provider());
    let config = rustls::ClientConfig::builder_with_provider(provider)
        .with_safe_default_protocol_versions()
        .expect("versions")
        .with_root_certificates(roots)
        .with_no_client_auth();
    let name = "localhost".try_into().expect("a name");
    let client = rustls::ClientConnection::new(Arc::new(config), name).expect("a client");
    let stream = std::net::TcpStream::connect(at).expect("connected");
    let mut stream = rustls::StreamOwned::new(client, stream);
    let ask = "GET /health/live HTTP/1.1\r\nHost: localhost\r\nConnection: close\r\n\r\n";
    stream.write_all(ask.as_bytes()).expect("sent");
    let mut answer = String::new();
    stream.read_to_string(&mut answer).expect("an answer");
    answer
}

#[tokio::test(flavor = "multi_thread")]
async fn with_a_certificate_connections_are_encrypted() {
    let folder = tempfile::tempdir().expect("a folder");
    let made = rcgen::generate_simple_self_signed(vec!["localhost".to_owned()]).expect("made");
    let mut wanted = settings(None);
    let file = |name: &str, text: String| {
        let path = folder.path().join(name);
        std::fs::write(&path, text).expect("written");
        Some(path)
    };
    wanted.web.certificate_file = file("web.pem", made.cert.pem());
    wanted.web.key_file = file("web.key", made.signing_key.serialize_pem());
    let listener = TcpListener::bind("127.0.0.1:0").await.expect("a port");
    let local = listener.local_addr().expect("an address");
    let (site, _snapshot) = site(wanted);
    let shutdown = CancellationToken::new();
    let serving = tokio::spawn(serve(listener, site, shutdown.clone()));
    let cert = made.cert;
    let answer = tokio::task::spawn_blocking(move || ask_encrypted(local, &cert)).await;
    let answer = answer.expect("an end");
    assert!(answer.starts_with("HTTP/1.1 200"), "{answer}");
    shutdown.cancel();
    let ended = tokio::time::timeout(Duration::from_secs(4), serving).await;
    assert!(matches!(ended, Ok(Ok(Ok(())))), "{ended:?}");
}

#[tokio::test]
async fn who_guesses_tokens_has_to_wait() {
    let folder = tempfile::tempdir().expect("a folder");
    let tokens = folder.path().join("tokens");
    std::fs::write(&tokens, "both-token\n").expect("written");
    let listener = TcpListener::bind("127.0.0.1:0").await.expect("a port");
    let local = listener.local_addr().expect("an address");
    let (site, _snapshot) = site(settings(Some(tokens)));
    let shutdown = CancellationToken::new();
    let serving = tokio::spawn(serve(listener, site, shutdown.clone()));
    let ask = async |token: &str| {
        let mut viewer = TcpStream::connect(local).await.expect("connected");
        let ask = format!(
            "GET /api/v1/health HTTP/1.1\r\nHost: x\r\nAuthorization: Bearer {token}\r\n\r\n"
        );
        viewer.write_all(ask.as_bytes()).await.expect("sent");
        let head = read_until(&mut viewer, "\r\n\r\n").await;
        head.split(' ').nth(1).unwrap_or_default().to_owned()
    };
    assert_eq!(ask("both-token").await, "200");
    for _ in 0..10 {
        assert_eq!(ask("a-guess").await, "401");
    }
    assert_eq!(ask("another-guess").await, "429");
    assert_eq!(
        ask("both-token").await,
        "429",
        "a right guess must not show"
    );
    shutdown.cancel();
    let ended = tokio::time::timeout(Duration::from_secs(4), serving).await;
    assert!(matches!(ended, Ok(Ok(Ok(())))), "{ended:?}");
}
