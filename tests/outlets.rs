//! The outlet for notices against a real Mosquitto: confirmed means confirmed, whatever the broker
//! does meanwhile.

mod common;

use std::sync::Arc;
use std::time::Duration;

use evenrow::model::{Time, US_PER_S};
use evenrow::notice::{Delivery, Kind, NamedSource, Notice, Priority, Since, State, Way};
use evenrow::outlets::{OutletError, Report, mqtt};
use evenrow::settings::{Broker, PlantSettings, Protocol, Settings, StoreSettings, WebSettings};
use serde_json::Value;
use tokio::sync::mpsc;
use tokio::task::JoinHandle;
use tokio_util::sync::CancellationToken;

use common::mosquitto::{Mosquitto, Seen};

const SOON: Duration = Duration::from_secs(30);

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
            address: None,
        },
        banks: Vec::new(),
        feeds: Vec::new(),
        outlets: Vec::new(),
    }
}

fn delivery(number: u64, id: &str, state: State) -> Delivery {
    let at = Time::from_us(i64::try_from(number).expect("small") * US_PER_S);
    let notice = Notice {
        id: id.into(),
        plant: "Quay side".into(),
        bank: "filler 2".into(),
        kind: Kind::LevelApart,
        state,
        priority: Priority::Medium,
        sources: vec![NamedSource {
            source: "07".into(),
            deviation: -1.25,
            low: -1.5,
            high: -1.0,
        }],
        unit: "g".into(),
        since: Since {
            at,
            earliest: at,
            latest: at,
        },
        raised: at,
        changed: at,
        returned: None,
        acknowledged: None,
        subject: "filler 2: 07 low by 1.3 g".to_owned(),
        text: "Source 07 is low.".to_owned(),
        advice: "Check valve 07.".to_owned(),
        url: "http://127.0.0.1:7310/banks/filler%202".to_owned(),
        span: 40,
    };
    Delivery {
        number,
        way: Way::Mqtt,
        at,
        notice: Arc::new(notice),
    }
}

/// A running outlet and the ends of its channels.
struct Outlet {
    deliveries: mpsc::Sender<Delivery>,
    reports: mpsc::Receiver<Report>,
    shutdown: CancellationToken,
    task: JoinHandle<Result<(), OutletError>>,
}

impl Outlet {
    fn start(settings: Settings) -> Self {
        let (deliveries, taken) = mpsc::channel(4);
        let (reports, received) = mpsc::channel(1);
        let shutdown = CancellationToken::new();
        let run = mqtt::run(Arc::new(settings), taken, reports, shutdown.clone());
        Self {
            deliveries,
            reports: received,
            shutdown,
            task: tokio::spawn(run),
        }
    }

    async fn send(&self, number: u64, id: &str, state: State) {
        let sent = tokio::time::timeout(SOON, self.deliveries.send(delivery(number, id, state)));
        assert!(
            sent.await.is_ok_and(|s| s.is_ok()),
            "the outlet keeps the house waiting"
        );
    }

    async fn report(&mut self) -> Report {
        let report = tokio::time::timeout(SOON, self.reports.recv()).await;
        report
            .expect("a report comes in time")
            .expect("the outlet runs")
    }

    async fn end(self) {
        self.shutdown.cancel();
        let ended = tokio::time::timeout(Duration::from_secs(5), self.task).await;
        assert_eq!(
            ended.expect("it ends in time").expect("it does not panic"),
            Ok(())
        );
    }
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
        let mut outlet = Outlet::start(settings(broker.port(), protocol));
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
    let mut outlet = Outlet::start(settings(broker.port(), Protocol::V5));
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
    let mut outlet = Outlet::start(settings(broker.port(), Protocol::V5));
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
    let outlet = Outlet::start(settings(broker.port(), Protocol::V4));
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
    let mut outlet = Outlet::start(settings(broker.port(), Protocol::V5));
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
    let outlet = Outlet::start(settings(broker.port(), Protocol::V5));
    outlet.send(1, "a", State::Unacknowledged).await;
    outlet.end().await;

    let broker = Mosquitto::start();
    let heard = broker.listen("evenrow/#");
    let outlet = Outlet::start(settings(broker.port(), Protocol::V5));
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
