//! Programs that take a notice, fail, sleep and leave others behind.

use std::fs;
use std::os::unix::fs::PermissionsExt;
use std::path::Path;
use std::time::Duration;

use evenrow::notice::State;
use evenrow::outlets::{Report, send_test};
use evenrow::settings::{self, Means, Program};
use serde_json::Value;
use tempfile::TempDir;

use crate::common::running::wait_for;
use crate::parts::{Outlet, SOON, by, delivery};

/// A shell script as an outlet; its arguments are the folder and a word that a shell would take apart.
fn script(text: &str) -> (TempDir, settings::Outlet) {
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("ring");
    fs::write(&path, format!("#!/bin/sh\n{text}\n")).expect("written");
    fs::set_permissions(&path, fs::Permissions::from_mode(0o755)).expect("set");
    let arguments = vec![folder.path().display().to_string(), "$HOME; a b".to_owned()];
    let outlet = by(Means::Command(Program { path, arguments }));
    (folder, outlet)
}

fn read(folder: &Path, name: &str) -> Option<String> {
    fs::read_to_string(folder.join(name)).ok()
}

#[tokio::test(flavor = "multi_thread")]
async fn a_program_reads_the_event_and_gets_its_arguments_as_they_are() {
    let (folder, outlet) = script("cat > \"$1/event\"; printf '%s' \"$2\" > \"$1/word\"");
    let mut outlet = Outlet::by(outlet, None);
    outlet.send(7, "a", State::Unacknowledged).await;
    assert_eq!(outlet.report().await, Report::Delivered(7));
    let event = read(folder.path(), "event").expect("the event");
    let event: Value = serde_json::from_str(&event).expect("JSON");
    assert_eq!(event["id"], "a.7");
    assert_eq!(event["data"]["state"], "unacknowledged");
    assert_eq!(read(folder.path(), "word").as_deref(), Some("$HOME; a b"));
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn one_that_fails_is_told_with_its_last_lines_and_started_again() {
    let text = "test -e \"$1/second\" && exit 0; touch \"$1/second\"
seq 1 9; echo 'no bell in hall 2' >&2; exit 3";
    let (_folder, outlet) = script(text);
    let mut outlet = Outlet::by(outlet, None);
    outlet.send(1, "a", State::Unacknowledged).await;
    let why = outlet.trouble(1).await;
    for part in ["exit status: 3", "no bell in hall 2", "8 / 9"] {
        assert!(why.contains(part), "{part:?} is not in {why}");
    }
    assert!(!why.contains("4 / 5"), "{why}");
    assert_eq!(outlet.report().await, Report::Delivered(1));
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn one_that_sleeps_is_killed_with_what_it_has_started() {
    let text = "(sleep 3; touch \"$1/late\") & echo $! > \"$1/child\"; echo asleep; sleep 3600";
    let (folder, mut outlet) = script(text);
    outlet.time_limit = Duration::from_secs(1);
    let why = send_test(&outlet, delivery(1, "a", State::Unacknowledged)).await;
    let why = why.expect_err("it sleeps");
    for part in ["not done within 1s", "killed", "asleep"] {
        assert!(why.contains(part), "{part:?} is not in {why}");
    }
    let child = read(folder.path(), "child").expect("it was started");
    let child = format!("/proc/{}/stat", child.trim());
    wait_for(SOON, "the end of what it has started", || {
        // What is dead and not yet buried is dead.
        let stat = fs::read_to_string(&child).unwrap_or_default();
        (stat.is_empty() || stat.contains(") Z ")).then_some(())
    });
    tokio::time::sleep(Duration::from_secs(3)).await;
    assert_eq!(read(folder.path(), "late"), None);
}

#[tokio::test(flavor = "multi_thread")]
async fn one_that_does_not_read_or_leaves_its_output_open_is_no_trouble() {
    for text in [
        "exit 0",
        "exec <&-; sleep 0.2",
        "sleep 30 & exit 0",
        "yes | head -c 3000000",
    ] {
        let (_folder, outlet) = script(text);
        let sent = send_test(&outlet, delivery(1, "a", State::Unacknowledged)).await;
        assert_eq!(sent, Ok(()), "{text}");
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn one_that_is_not_there_is_named() {
    let path = "/nowhere/ring".into();
    let arguments = Vec::new();
    let outlet = by(Means::Command(Program { path, arguments }));
    let why = send_test(&outlet, delivery(1, "a", State::Unacknowledged)).await;
    let why = why.expect_err("nobody there");
    assert!(why.contains("/nowhere/ring cannot be started"), "{why}");
}
