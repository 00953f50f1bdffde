//! The outlet to the broker, against a real Mosquitto.

use std::sync::Arc;
use std::time::Duration;

use evenrow::notice::State;
use evenrow::outlets::{Report, mqtt};
use evenrow::settings::{
    Broker, Origins, PlantSettings, Protocol, Settings, StoreSettings, WebSettings,
};
use serde_json::Value;

use crate::common::mosquitto::{Mosquitto, Seen};
use crate::parts::Outlet;

fn settings(port: u16, protocol: Protocol) -> Settings {
    let broker = Broker {
        host: "127.0.0.1".to_owned(),
        port,
        tls: false,
        client_id: "evenrow-quayside".to_owned(),
        protocol,
        user: None,
        password_file: None,
        ca_file: None,
        client_certificate_file: None,
        client_key_file: None,
        session_expiry_s: 600,
        receive_maximum: 100,
        most_bytes: 65_536,
        keep_alive_s: 5,
    };
    Settings {
        plant: PlantSettings {
            name: "Quay side".into(),
            zone: jiff::tz::TimeZone::UTC,
            shifts: Vec::new(),
        },
        broker,
        store: StoreSettings {
            folder: "unused".into(),
            keep_days: 90,
        },
        web: WebSettings {
            listen: ([127, 0, 0, 1], 0).into(),
            token_file: None,
            tls_in_front: false,
            certificate_file: None,
            key_file: None,
            address: None,
        },
        banks: Vec::new(),
        feeds: Vec::new(),
        outlets: Vec::new(),
        origins: Origins::default(),
        manners: evenrow::notice::Manners::default(),
    }
}

fn start(settings: Settings) -> Outlet {
    Outlet::start(|taken, reports, end| mqtt::run(Arc::new(settings), taken, reports, end))
}

const STATUS: &str = "evenrow/Quay-side/status";
const TOPIC: &str = "evenrow/Quay-side/notices/filler-2/level_apart/a";

fn status(seen: &Seen, state: &str) -> bool {
    let parsed: Option<Value> = serde_json::from_str(&seen.payload).ok();
    seen.topic == STATUS && parsed.is_some_and(|s| s["state"] == state)
}

#[tokio::test(flavor = "multi_thread")]
async fn a_notice_stands_on_its_topic_until_it_is_over_in_both_protocols() {
    for protocol in [Protocol::V5, Protocol::V4] {
        let broker = Mosquitto::start();
        let heard = broker.listen("evenrow/#");
        let mut outlet = start(settings(broker.port(), protocol));
        heard.wait("running", |s| status(s, "running"));
        outlet.send(1, "a", State::Unacknowledged).await;
        assert_eq!(outlet.report().await, Report::Delivered(1));
        let event = heard.wait("the notice", |s| s.topic == TOPIC);
        let event: Value = serde_json::from_str(&event.payload).expect("JSON");
        assert_eq!(event["id"], "a.1");
        assert_eq!(event["data"]["sources"][0]["source"], "07");
        let late = broker.listen("evenrow/#");
        late.wait("what is retained", |s| s.topic == TOPIC && s.retained);

        outlet.send(2, "a", State::Normal).await;
        assert_eq!(outlet.report().await, Report::Delivered(2));
        heard.wait("the empty message", |s| {
            s.topic == TOPIC && s.payload.is_empty()
        });
        outlet.end().await;
        heard.wait("ended", |s| status(s, "ended"));
        let late = broker.listen("evenrow/#");
        late.wait("the retained status", |s| s.retained && status(s, "ended"));
        assert_eq!(late.seen().len(), 1, "{:#?}", late.seen());
        assert!(!heard.seen().iter().any(|s| status(s, "lost")));
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn without_a_broker_the_house_is_told_once_and_served_and_all_leaves_later_in_order() {
    let mut broker = Mosquitto::absent();
    let mut outlet = start(settings(broker.port(), Protocol::V5));
    for number in 1..=40 {
        let (id, states) = (
            ["a", "b"][(number % 2) as usize],
            [State::Unacknowledged, State::Acknowledged],
        );
        outlet
            .send(number, id, states[(number / 2 % 2) as usize])
            .await;
    }
    let Report::NotDelivered { number, why } = outlet.report().await else {
        panic!("nothing can have been delivered");
    };
    assert_eq!(number, 1);
    assert!(why.contains("broker.url"), "{why}");
    tokio::time::sleep(Duration::from_secs(3)).await;
    assert!(
        outlet.reports.try_recv().is_err(),
        "the same trouble is told once"
    );
    broker.come_back();
    let heard = broker.listen("evenrow/#");
    for number in 1..=40 {
        assert_eq!(outlet.report().await, Report::Delivered(number));
    }
    let events: Vec<String> = heard
        .seen()
        .iter()
        .filter_map(|s| serde_json::from_str::<Value>(&s.payload).ok())
        .filter_map(|e| e["id"].as_str().map(str::to_owned))
        .filter(|id| id.starts_with("a."))
        .collect();
    let number = |id: &String| id[2..].parse::<u64>().expect("a number");
    assert!(events.iter().map(number).is_sorted(), "{events:?}");
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn what_was_sent_and_not_confirmed_is_sent_again() {
    let mut broker = Mosquitto::start();
    let heard = broker.listen("evenrow/#");
    let mut outlet = start(settings(broker.port(), Protocol::V5));
    heard.wait("running", |s| status(s, "running"));
    // The broker takes bytes and does nothing more; then it is gone without a word.
    broker.freeze();
    outlet.send(1, "a", State::Unacknowledged).await;
    tokio::time::sleep(Duration::from_millis(500)).await;
    assert!(
        outlet.reports.try_recv().is_err(),
        "unconfirmed is not delivered"
    );
    broker.crash();
    let report = outlet.report().await;
    assert!(
        matches!(report, Report::NotDelivered { number: 1, .. }),
        "{report:?}"
    );
    broker.come_back();
    loop {
        // More reasons may be told while the broker comes up.
        match outlet.report().await {
            Report::Delivered(number) => break assert_eq!(number, 1),
            Report::NotDelivered { number, .. } => assert_eq!(number, 1),
        }
    }
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn a_vanished_outlet_is_told_by_its_last_will() {
    let broker = Mosquitto::start();
    let heard = broker.listen("evenrow/#");
    let outlet = start(settings(broker.port(), Protocol::V4));
    heard.wait("running", |s| status(s, "running"));
    outlet.task.abort();
    heard.wait("the last will", |s| status(s, "lost"));
}

#[tokio::test(flavor = "multi_thread")]
async fn a_broker_that_does_not_allow_notices_is_named_as_the_cause() {
    let acl = "topic read evenrow/#\ntopic readwrite evenrow/Quay-side/status\n";
    let settings_of_broker = "allow_anonymous true\nacl_file {folder}/acl\n";
    let broker = Mosquitto::start_with(settings_of_broker, |folder| {
        std::fs::write(folder.join("acl"), acl).expect("the list is written");
    });
    let mut outlet = start(settings(broker.port(), Protocol::V5));
    outlet.send(7, "a", State::Unacknowledged).await;
    let Report::NotDelivered { number, why } = outlet.report().await else {
        panic!("the broker does not allow it");
    };
    assert_eq!(number, 7);
    assert!(why.contains("access list"), "{why}");
    outlet.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn an_end_without_a_broker_is_quick_and_an_end_of_the_deliveries_is_an_end() {
    let broker = Mosquitto::absent();
    let outlet = start(settings(broker.port(), Protocol::V5));
    outlet.send(1, "a", State::Unacknowledged).await;
    outlet.end().await;

    let broker = Mosquitto::start();
    let heard = broker.listen("evenrow/#");
    let outlet = start(settings(broker.port(), Protocol::V5));
    heard.wait("running", |s| status(s, "running"));
    outlet.send(2, "a", State::Unacknowledged).await;
    let Outlet {
        deliveries,
        task,
        reports,
        shutdown: _,
    } = outlet;
    drop(deliveries);
    let ended = tokio::time::timeout(Duration::from_secs(5), task).await;
    assert_eq!(
        ended.expect("it ends in time").expect("it does not panic"),
        Ok(())
    );
    heard.wait("what was still waiting", |s| s.topic == TOPIC);
    heard.wait("ended", |s| status(s, "ended"));
    drop(reports);
}
