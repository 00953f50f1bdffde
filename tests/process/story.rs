//! The main job from one end to the other, through a power cut, a person's answer and a clean end.

use serde_json::{Value, json};

use crate::common::mosquitto::{Listener, Mosquitto, Seen};
use crate::common::running::wait_for;
use crate::daemon::{Plant, SOON, TOKEN, Wanted};
use crate::http;
use crate::line::{Line, Off};

const LOW: [Off; 1] = [Off { head: 5, by: -2.5 }];

/// Waits for an event of a notice in a state.
#[track_caller]
fn event(listener: &Listener, state: &str) -> (Seen, Value) {
    let what = format!("a notice that is {state}");
    let parse = |seen: &Seen| serde_json::from_str::<Value>(&seen.payload).ok();
    let wanted = |seen: &Seen| parse(seen).is_some_and(|e| e["data"]["state"] == state);
    let seen = listener.wait(&what, wanted);
    let event = parse(&seen).expect("it was parsed before");
    (seen, event)
}

#[test]
fn a_head_drifts_is_named_acknowledged_and_put_right_over_a_power_cut_and_a_restart() {
    let broker = Mosquitto::start();
    let heard = broker.listen("evenrow/#");
    let plant = Plant::new(broker.port(), &Wanted::default());
    let daemon = plant.start_ready();
    heard.wait("the status", |s| {
        s.topic == "evenrow/Quayside/status" && s.payload.contains("\"running\"")
    });

    // An even line, all heads wandering together: nobody is called.
    let mut line = Line::new();
    line.publish(&broker, 160, &[]);
    daemon.nothing_is_missing(line.newest());
    wait_for(SOON, "a look that finds the bank even", || {
        let bank = daemon.json("/api/v1/banks/filler-2");
        let looks = bank["looks"].as_array().expect("looks").clone();
        let even = looks.len() == 2 && looks.iter().all(|l| l["finding"] == "even");
        even.then_some(())
    });
    assert!(
        daemon.json("/api/v1/notices")["items"]
            .as_array()
            .expect("a list")
            .is_empty()
    );

    // One head drifts: exactly that one is named, with its deviation and interval in grams.
    line.publish(&broker, 60, &LOW);
    let (seen, first) = event(&heard, "unacknowledged");
    let data = &first["data"];
    let id = data["id"].as_str().expect("an id").to_owned();
    assert_eq!(
        seen.topic,
        format!("evenrow/Quayside/notices/filler-2/level_apart/{id}")
    );
    assert_eq!(first["specversion"], "1.0");
    assert_eq!(first["type"], "evenrow.notice.level_apart");
    assert_eq!(first["source"], "/evenrow/Quayside");
    assert_eq!(first["subject"], "filler-2");
    assert_eq!(data["unit"], "g");
    let sources = data["sources"].as_array().expect("sources");
    assert_eq!(sources.len(), 1, "{sources:?}");
    assert_eq!(sources[0]["source"], "05");
    let figure = |key: &str| sources[0][key].as_f64().expect(key);
    assert!(figure("low") <= figure("deviation") && figure("deviation") <= figure("high"));
    assert!(figure("deviation") < -0.8, "{sources:?}");
    for key in ["advice", "text", "url"] {
        assert!(data[key].as_str().is_some_and(|t| !t.is_empty()), "{key}");
    }
    assert_eq!(
        daemon.wait_metric(
            "evenrow_notice_active{bank=\"filler-2\",kind=\"level_apart\"}",
            |v| v > 0.0
        ),
        1.0
    );

    // A power cut while measurements arrive: what was acknowledged is there, what was not comes again.
    let more = line.cycles(200, &LOW);
    let publisher = std::thread::scope(|scope| {
        let publishing = scope.spawn(|| broker.publish_lines(crate::line::TOPIC, &more));
        std::thread::sleep(std::time::Duration::from_millis(150));
        daemon.kill(&[]);
        publishing.join()
    });
    assert!(publisher.is_ok(), "the measurements were published");
    let daemon = plant.start_ready();
    daemon.nothing_is_missing(line.newest());
    let notices = daemon.json("/api/v1/notices");
    assert_eq!(
        notices["items"].as_array().map(Vec::len),
        Some(1),
        "{notices}"
    );
    assert_eq!(notices["items"][0]["id"], id.as_str());
    assert_eq!(notices["items"][0]["state"], "unacknowledged");
    heard.wait("the last will", |s| {
        s.topic == "evenrow/Quayside/status" && s.payload.contains("\"lost\"")
    });

    // A person answers; without a token nothing changes, and asking twice gives the same.
    let address = daemon.address(&format!("/api/v1/notices/{id}/acknowledge"));
    let body = json!({"by": "Ana", "comment": "valve 05 looked at"});
    let refused = http::post(&address, None, &body).expect("an answer");
    assert!(matches!(refused.status, 401 | 403), "{}", refused.text);
    let refused = http::post(&address, Some("only-for-looking"), &body).expect("an answer");
    assert_eq!(refused.status, 403, "{}", refused.text);
    for _ in 0..2 {
        let taken = http::post(&address, Some(TOKEN), &body).expect("an answer");
        assert_eq!(taken.status, 200, "{}", taken.text);
        assert_eq!(taken.json()["state"], "acknowledged");
    }
    let (_, answered) = event(&heard, "acknowledged");
    assert_eq!(answered["data"]["id"], id.as_str());
    let shown = daemon.json(&format!("/api/v1/notices/{id}"));
    let told = answered["data"].as_object().expect("fields");
    for (field, value) in told {
        assert_eq!(
            *value, shown[field],
            "{field}: the interface tells the same"
        );
    }

    // A clean end and a new start: the notice is still open and still acknowledged, and looks go on.
    daemon.end(&[]);
    heard.wait("the goodbye", |s| {
        s.topic == "evenrow/Quayside/status" && s.payload.contains("\"ended\"")
    });
    let daemon = plant.start_ready();
    let notice = daemon.json(&format!("/api/v1/notices/{id}"));
    assert_eq!(notice["state"], "acknowledged");
    daemon.nothing_is_missing(line.newest());

    // Put right: over on evidence, and what was retained is taken back.
    line.publish(&broker, 250, &[]);
    wait_for(SOON, "the notice to be over", || {
        let notice = daemon.json(&format!("/api/v1/notices/{id}"));
        (notice["state"] == "normal").then_some(())
    });
    heard.wait("the topic to be emptied", |s| {
        s.topic == seen.topic && s.payload.is_empty()
    });
    let later = broker.listen("evenrow/#");
    later.wait("the retained status", |s| {
        s.retained && s.payload.contains("\"running\"")
    });
    assert!(
        later.seen().iter().all(|s| !s.topic.contains("/notices/")),
        "{:#?}",
        later.seen()
    );
    daemon.end(&[]);
}
