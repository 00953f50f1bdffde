//! A notice that could not leave: kept over a power cut, told on the page, and sent when it can be.

use std::fs;
use std::process::Command;
use std::sync::{Arc, Mutex};

use serde_json::Value;

use crate::common::desk::{Desk, Request};
use crate::common::mosquitto::Mosquitto;
use crate::common::running::{free_port, wait_for};
use crate::daemon::{Daemon, Plant, SOON, TOKEN, Wanted};
use crate::http;
use crate::line::{Line, Off};

const LOW: [Off; 1] = [Off { head: 5, by: -2.5 }];

/// The secret of the specification's own example.
const SECRET: &str = "whsec_MfKQ9r8GKYqrTwjUPD8ILPZIo2LaLaSw\n";

/// A plant whose notices go to a desk on this port too.
fn plant(broker: &Mosquitto, port: u16) -> Plant {
    let secrets = broker.path("secrets");
    fs::write(&secrets, SECRET).expect("written");
    let sections = format!(
        "[[outlet]]\nname = \"desk\"\nway = \"webhook\"\nurl = \"http://127.0.0.1:{port}/n\"\n\
         secret_file = \"{}\"\ntime_limit = \"60s\"\n",
        secrets.display()
    );
    let wanted = Wanted {
        sections,
        ..Wanted::default()
    };
    Plant::new(broker.port(), &wanted)
}

/// Lets a head drift until it is called.
fn drift(broker: &Mosquitto, daemon: &Daemon) -> Line {
    let mut line = Line::new();
    line.publish(broker, 160, &[]);
    daemon.nothing_is_missing(line.newest());
    line.publish(broker, 60, &LOW);
    daemon.wait_metric(
        "evenrow_notice_active{bank=\"filler-2\",kind=\"level_apart\"}",
        |v| v == 1.0,
    );
    line
}

#[track_caller]
fn first(seen: &Arc<Mutex<Vec<Request>>>) -> Request {
    wait_for(SOON, "a request at the desk", || {
        seen.lock().expect("whole").first().cloned()
    })
}

const WAITING: &str = "evenrow_outbox_deliveries{outlet=\"desk\"}";

#[test]
fn what_no_desk_took_is_sent_after_a_power_cut_and_counted_and_told_meanwhile() {
    let broker = Mosquitto::start();
    let port = free_port();
    let plant = plant(&broker, port);
    let daemon = plant.start_ready();
    drift(&broker, &daemon);
    daemon.wait_metric(WAITING, |v| v >= 1.0);
    daemon.wait_log(&["WARN", "outlet \"desk\"", "refused"]);
    daemon.wait_metric(
        "evenrow_deliveries_total{outcome=\"failed\",outlet=\"desk\"}",
        |v| v >= 1.0,
    );
    // The broker has long had it: one outlet's trouble is its own.
    assert_eq!(
        daemon.metric("evenrow_outbox_deliveries{outlet=\"mqtt\"}"),
        Some(0.0)
    );
    let page = daemon.ask("/").expect("the page").text;
    assert!(page.contains("Notices are not leaving by desk"), "{page}");
    daemon.kill(&["outlet \"desk\""]);

    let seen = Desk::Answers.open(port);
    let daemon = plant.start_ready();
    let request = first(&seen);
    let event: Value = serde_json::from_str(&request.body).expect("JSON");
    assert_eq!(event["type"], "evenrow.notice.level_apart");
    assert_eq!(event["data"]["state"], "unacknowledged");
    assert!(
        request
            .header("webhook-signature")
            .is_some_and(|s| s.starts_with("v1,"))
    );
    daemon.wait_metric(WAITING, |v| v == 0.0);

    // Once told, it is told of what follows.
    let id = event["data"]["id"].as_str().expect("an id");
    let address = daemon.address(&format!("/api/v1/notices/{id}/acknowledge"));
    let body = serde_json::json!({"by": "Ana", "comment": ""});
    let taken = http::post(&address, Some(TOKEN), &body).expect("an answer");
    assert_eq!(taken.status, 200, "{}", taken.text);
    wait_for(SOON, "the acknowledgement at the desk", || {
        let seen = seen.lock().expect("whole");
        let last = seen.last().map(|r| r.body.clone()).unwrap_or_default();
        last.contains("\"acknowledged\":{\"by\":\"Ana\"")
            .then_some(())
    });
    daemon.end(&[]);
}

#[test]
fn what_was_taken_and_not_confirmed_comes_again_under_the_same_id() {
    let broker = Mosquitto::start();
    let port = free_port();
    let seen = Desk::Stares.open(port);
    let plant = plant(&broker, port);
    let daemon = plant.start_ready();
    drift(&broker, &daemon);
    let one = first(&seen);
    assert!(daemon.metric(WAITING).is_some_and(|v| v >= 1.0));
    daemon.kill(&[]);
    seen.lock().expect("whole").clear();
    let daemon = plant.start_ready();
    let again = first(&seen);
    assert_eq!(one.header("webhook-id"), again.header("webhook-id"));
    assert_eq!(one.body, again.body);
    daemon.kill(&[]);

    // Without the outlet in the configuration nobody will ever take it.
    let config = plant.path("evenrow.toml");
    let text = fs::read_to_string(&config).expect("text");
    let (kept, _) = text.split_once("[[outlet]]").expect("it comes last");
    fs::write(&config, kept).expect("written");
    let daemon = plant.start_ready();
    daemon.wait_log(&["WARN", "no longer configured", "desk"]);
    daemon.end(&["no longer configured"]);
    plant.start_ready().end(&[]);
}

#[test]
fn a_test_notice_tells_of_each_way_whether_it_works() {
    let broker = Mosquitto::start();
    let port = free_port();
    let plant = plant(&broker, port);
    let vet = || {
        let output = Command::new(env!("CARGO_BIN_EXE_evenrow"))
            .args(["vet", "--send-test", "--config"])
            .arg(plant.path("evenrow.toml"))
            .output()
            .expect("the program starts");
        let text = String::from_utf8_lossy(&output.stdout).into_owned();
        (output.status.code(), text)
    };
    let heard = broker.listen("evenrow/#");
    let (code, text) = vet();
    assert_eq!(code, Some(1), "{text}");
    assert!(text.contains("mqtt        sent"), "{text}");
    assert!(
        text.contains("desk        not sent: the receiver cannot be reached"),
        "{text}"
    );
    heard.wait("the test", |s| {
        s.topic == "evenrow/Quayside/test" && s.payload.contains("evenrow.test")
    });

    let seen = Desk::Answers.open(port);
    let (code, text) = vet();
    assert_eq!(code, Some(0), "{text}");
    assert!(first(&seen).body.contains("TEST from evenrow"));
    let later = broker.listen("evenrow/#");
    std::thread::sleep(std::time::Duration::from_millis(300));
    assert!(
        later.seen().is_empty(),
        "nothing stays: {:#?}",
        later.seen()
    );
}
