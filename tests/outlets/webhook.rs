//! The webhook against a web server that is well, slow, busy, gone or elsewhere.

use std::path::PathBuf;
use std::time::Duration;

use evenrow::notice::State;
use evenrow::outlets::{Report, send_test};
use evenrow::settings::{Means, Webhook};
use tempfile::TempDir;

use crate::common::certificates;
use crate::parts::{Outlet, by, delivery};
use crate::receiver::{Answer, Receiver, encrypted, plain};

/// 24 and 32 bytes in base64.
const NEW: &str = "MfKQ9r8GKYqrTwjUPD8ILPZIo2LaLaSw";
const OLD: &str = "AAECAwQFBgcICQoLDA0ODxAREhMUFRYXGBkaGxwdHh8=";

struct Desk {
    _folder: TempDir,
    outlet: evenrow::settings::Outlet,
}

fn desk(url: String, ca_file: Option<PathBuf>) -> Desk {
    let folder = tempfile::tempdir().expect("a folder");
    let secret_file = folder.path().join("secrets");
    std::fs::write(&secret_file, format!("whsec_{NEW}\n{OLD}\n")).expect("written");
    let webhook = Webhook {
        url,
        secret_file,
        ca_file,
    };
    Desk {
        _folder: folder,
        outlet: by(Means::Webhook(webhook)),
    }
}

async fn against(answers: impl IntoIterator<Item = Answer>) -> (Receiver, Desk, Outlet) {
    let (receiver, url) = Receiver::start(answers).await;
    let desk = desk(url, None);
    let outlet = Outlet::by(desk.outlet.clone(), None);
    (receiver, desk, outlet)
}

#[tokio::test(flavor = "multi_thread")]
async fn a_notice_arrives_as_an_event_signed_with_every_secret() {
    let (receiver, _desk, mut outlet) = against([]).await;
    outlet
        .send(65_536, "filler-2-2026-1", State::Unacknowledged)
        .await;
    assert_eq!(outlet.report().await, Report::Delivered(65_536));
    let [request] = &receiver.seen()[..] else {
        panic!("{:?}", receiver.seen());
    };
    assert_eq!(
        request.header("content-type"),
        "application/cloudevents+json"
    );
    assert_eq!(request.header("webhook-id"), "notice-65536");
    let timestamp: u64 = request
        .header("webhook-timestamp")
        .parse()
        .expect("seconds");
    let now = std::time::SystemTime::now();
    let now = now.duration_since(std::time::UNIX_EPOCH).expect("later");
    assert!(now.as_secs().abs_diff(timestamp) < 60);
    assert!(request.is_signed_with(NEW) && request.is_signed_with(OLD));
    assert!(!request.is_signed_with("AAAA"));
    let event = request.json();
    assert_eq!(event["id"], "filler-2-2026-1.65536");
    assert_eq!(event["source"], "/evenrow/Quay-side");
    assert_eq!(event["data"]["text"], "Source 07 is low.");
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn what_is_refused_is_told_and_sent_again_under_the_same_id() {
    let broken = Answer {
        body: "the desk\nis on fire",
        ..plain(500)
    };
    let (receiver, _desk, mut outlet) = against([broken]).await;
    outlet.send(1, "a", State::Unacknowledged).await;
    let why = outlet.trouble(1).await;
    assert!(
        why.contains("500") && why.contains("the desk is on fire"),
        "{why}"
    );
    assert_eq!(outlet.report().await, Report::Delivered(1));
    let seen = receiver.seen();
    assert_eq!(seen.len(), 2);
    assert_eq!(seen[0].header("webhook-id"), seen[1].header("webhook-id"));
    assert_eq!(seen[0].body, seen[1].body);
    assert!(seen[1].is_signed_with(NEW));
    let waited = seen[1].at - seen[0].at;
    assert!(waited >= Duration::from_secs(5), "{waited:?}");
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn a_busy_receiver_is_left_alone_for_as_long_as_it_says() {
    let busy = Answer {
        header: Some(("retry-after", "8".to_owned())),
        ..plain(429)
    };
    let (receiver, _desk, mut outlet) = against([busy]).await;
    outlet.send(1, "a", State::Unacknowledged).await;
    let why = outlet.trouble(1).await;
    assert!(why.contains("429"), "{why}");
    outlet.send(2, "b", State::Unacknowledged).await;
    for _ in 0..2 {
        assert!(matches!(outlet.report().await, Report::Delivered(_)));
    }
    let seen = receiver.seen();
    assert_eq!(seen.len(), 3);
    let waited = seen[1].at - seen[0].at;
    assert!(waited >= Duration::from_secs(8), "{waited:?}");
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn a_receiver_that_is_gone_gets_nothing_more() {
    let (receiver, _desk, mut outlet) = against([plain(410)]).await;
    outlet.send(1, "a", State::Unacknowledged).await;
    let why = outlet.trouble(1).await;
    assert!(why.contains("410") && why.contains("`url`"), "{why}");
    outlet.send(2, "b", State::Unacknowledged).await;
    tokio::time::sleep(Duration::from_secs(7)).await;
    assert_eq!(receiver.seen().len(), 1);
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn nobody_is_sent_elsewhere() {
    let (elsewhere, other) = Receiver::start([]).await;
    let moved = Answer {
        header: Some(("location", other)),
        ..plain(307)
    };
    let (receiver, _desk, mut outlet) = against([moved]).await;
    outlet.send(1, "a", State::Unacknowledged).await;
    let why = outlet.trouble(1).await;
    assert!(
        why.contains("307") && why.contains("points elsewhere"),
        "{why}"
    );
    assert_eq!((receiver.seen().len(), elsewhere.seen().len()), (1, 0));
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn a_slow_receiver_keeps_nobody_waiting_and_an_absent_one_is_named() {
    let slow = Answer {
        after: Duration::from_secs(20),
        ..plain(204)
    };
    let (_receiver, mut desk, unused) = against([slow]).await;
    unused.end().await;
    desk.outlet.time_limit = Duration::from_secs(1);
    let mut outlet = Outlet::by(desk.outlet.clone(), None);
    outlet.send(1, "a", State::Unacknowledged).await;
    let why = outlet.trouble(1).await;
    assert!(why.contains("did not answer within 1s"), "{why}");
    outlet.end().await;

    let port = crate::common::running::free_port();
    let nobody = self::desk(format!("http://127.0.0.1:{port}/secret-path"), None);
    let mut outlet = Outlet::by(nobody.outlet.clone(), None);
    outlet.send(1, "a", State::Unacknowledged).await;
    let why = outlet.trouble(1).await;
    assert!(
        why.contains("cannot be reached") && why.contains("refused"),
        "{why}"
    );
    assert!(!why.contains("secret-path"), "{why}");
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn encryption_trusts_the_authority_that_is_named_and_no_other() {
    let folder = tempfile::tempdir().expect("a folder");
    certificates::write(folder.path());
    let other = tempfile::tempdir().expect("a folder");
    certificates::write(other.path());
    let port = encrypted(folder.path(), 2);
    let url = format!("https://localhost:{port}/notices");
    let test = || delivery(1, "a", State::Unacknowledged);

    let trusting = desk(url.clone(), Some(folder.path().join("ca.pem")));
    assert_eq!(send_test(&trusting.outlet, test()).await, Ok(()));
    let wary = desk(url.clone(), Some(other.path().join("ca.pem")));
    let why = send_test(&wary.outlet, test()).await.expect_err("unknown");
    assert!(why.contains("certificate"), "{why}");
    let missing = desk(url, Some(other.path().join("none.pem")));
    let why = send_test(&missing.outlet, test())
        .await
        .expect_err("no file");
    assert!(why.contains("none.pem cannot be read"), "{why}");
}

#[tokio::test(flavor = "multi_thread")]
async fn a_missing_secret_is_told_and_taken_when_it_is_there() {
    let (receiver, url) = Receiver::start([]).await;
    let desk = desk(url, None);
    let Means::Webhook(webhook) = &desk.outlet.means else {
        panic!("{:?}", desk.outlet);
    };
    std::fs::remove_file(&webhook.secret_file).expect("it was there");
    let mut outlet = Outlet::by(desk.outlet.clone(), None);
    outlet.send(1, "a", State::Unacknowledged).await;
    let why = outlet.trouble(1).await;
    assert!(why.contains("secret file"), "{why}");
    std::fs::write(&webhook.secret_file, NEW).expect("written");
    assert_eq!(outlet.report().await, Report::Delivered(1));
    assert!(receiver.seen()[0].is_signed_with(NEW));
    outlet.end().await;
}
