//! Sparkplug's edge nodes against a real Mosquitto: a connection of their own beside the other one,
//! births asked for, one condition for both.

mod common;

use std::sync::Arc;
use std::time::Duration;

use common::mosquitto::Mosquitto;
use evenrow::engine::Condition;
use evenrow::intake::mqtt::{self, Arrival, FromBroker, Receipt};
use evenrow::intake::payload::sparkplug::wire::{Given, Metric, Payload};
use evenrow::model::Reason;
use evenrow::settings::Settings;
use prost::Message as _;
use tokio::sync::mpsc;
use tokio_util::sync::CancellationToken;

const PATIENCE: Duration = Duration::from_secs(30);
const PLAIN: &str = "[[bank]]\nname = \"plain\"\nunit = \"g\"\ntopic = \"line/{source}\"\npayload = \"number\"\n\
                     sources = \"discover\"\npairing = \"none\"\nmargin = 1\nfalse_calls = \"1 per 90 days\"\n";
const EDGE: &str = "[[bank]]\nname = \"edge\"\nunit = \"g\"\ntopic = \"spBv1.0/Q/+/n/d\"\n\
                    payload = { form = \"sparkplug\", value = \"Head {source}\", rebirth = true }\n\
                    sources = \"discover\"\npairing = \"none\"\nmargin = 1\nfalse_calls = \"1 per 90 days\"\n";

/// A running intake.
struct Intake {
    feed: mpsc::Receiver<FromBroker>,
    receipts: mpsc::Sender<Vec<Receipt>>,
    shutdown: CancellationToken,
    task: tokio::task::JoinHandle<Result<(), mqtt::IntakeError>>,
}

impl Intake {
    fn start(port: u16, protocol: u8, banks: &str) -> Self {
        let text = format!(
            "[plant]\nname = \"Quayside\"\ntime_zone = \"Europe/Lisbon\"\n[store]\nfolder = \"unused\"\n\
             [broker]\nurl = \"mqtt://127.0.0.1:{port}\"\nprotocol = {protocol}\n{banks}"
        );
        let settings = Settings::parse(&text, "test.toml", []).expect("good settings");
        let (to_feed, feed) = mpsc::channel(16);
        let (receipts, taken) = mpsc::channel(16);
        let shutdown = CancellationToken::new();
        let run = mqtt::run(
            Arc::new(settings),
            Vec::new(),
            to_feed,
            taken,
            shutdown.clone(),
        );
        Self {
            feed,
            receipts,
            shutdown,
            task: tokio::spawn(run),
        }
    }

    async fn next(&mut self) -> FromBroker {
        let next = tokio::time::timeout(PATIENCE, self.feed.recv()).await;
        next.expect("something comes in time").expect("intake runs")
    }

    async fn well(&mut self) {
        loop {
            match self.next().await {
                FromBroker::Condition(Condition::Well) => return,
                FromBroker::Condition(_) => {}
                FromBroker::Arrival(arrival) => panic!("{arrival:?}"),
            }
        }
    }

    async fn arrival(&mut self) -> Arrival {
        match self.next().await {
            FromBroker::Arrival(arrival) => arrival,
            FromBroker::Condition(condition) => panic!("{condition:?}"),
        }
    }

    async fn end(self) {
        self.shutdown.cancel();
        drop(self.receipts);
        let ended = tokio::time::timeout(PATIENCE, self.task).await;
        ended.expect("in time").expect("no panic").expect("well");
    }
}

fn sent(seq: u64, name: &str, value: f64) -> Vec<u8> {
    let metric = Metric {
        name: Some(name.to_owned()),
        value: Some(Given::Double(value)),
        ..Metric::default()
    };
    Payload {
        timestamp: Some(1_772_344_800_000),
        metrics: vec![metric],
        seq: Some(seq),
    }
    .encode_to_vec()
}

async fn story(protocol: u8) {
    let mut mosquitto = Mosquitto::start();
    // Ends with the first command; its payload is no text that could be listened to.
    let mut command = std::process::Command::new("mosquitto_sub")
        .args(["-h", "127.0.0.1", "-p", &mosquitto.port().to_string()])
        .args(["-t", "spBv1.0/Q/NCMD/n", "-C", "1", "-W", "30", "-F", "%l"])
        .stdout(std::process::Stdio::null())
        .spawn()
        .expect("mosquitto-clients are missing; tests/all installs them");
    let mut intake = Intake::start(mosquitto.port(), protocol, &format!("{PLAIN}{EDGE}"));
    intake.well().await;
    let data = "spBv1.0/Q/DDATA/n/d";
    let births = |mosquitto: &Mosquitto| {
        mosquitto.publish("spBv1.0/Q/NBIRTH/n", &sent(0, "bdSeq", 0.0), &[]);
        mosquitto.publish("spBv1.0/Q/DBIRTH/n/d", &sent(1, "Head 1", 1.0), &[]);
    };
    // Nothing is believed before a birth, which is asked for.
    mosquitto.publish(data, &sent(9, "Head 1", 503.1), &[]);
    let arrival = intake.arrival().await;
    assert_eq!(arrival.refusals[0].reason, Reason::Unborn, "{arrival:?}");
    assert!(
        command.wait().expect("it ends").success(),
        "no command came"
    );
    births(&mosquitto);
    mosquitto.publish(data, &sent(2, "Head 1", 503.1), &[]);
    let arrival = intake.arrival().await;
    assert_eq!(
        arrival.measurements[0].value.to_string(),
        "503.1",
        "{arrival:?}"
    );
    assert_eq!(&*arrival.measurements[0].source, "1");
    // The other connection goes on beside it, with acknowledgements.
    mosquitto.publish("line/07", b"12.5", &[]);
    let arrival = intake.arrival().await;
    assert_eq!(
        arrival.measurements[0].value.to_string(),
        "12.5",
        "{arrival:?}"
    );
    intake
        .receipts
        .send(vec![arrival.receipt])
        .await
        .expect("intake runs");
    // What never comes is given up after the reorder timeout.
    mosquitto.publish(data, &sent(4, "Head 1", 503.4), &[]);
    let arrival = intake.arrival().await;
    assert_eq!(
        arrival.measurements[0].value.to_string(),
        "503.4",
        "{arrival:?}"
    );
    // A broker that comes back: the births of before count no more.
    mosquitto.go_away();
    let FromBroker::Condition(Condition::Trouble(_)) = intake.next().await else {
        panic!("no trouble")
    };
    mosquitto.come_back();
    intake.well().await;
    mosquitto.publish(data, &sent(5, "Head 1", 503.5), &[]);
    let arrival = intake.arrival().await;
    assert_eq!(arrival.refusals[0].reason, Reason::Unborn, "{arrival:?}");
    births(&mosquitto);
    mosquitto.publish(data, &sent(2, "Head 1", 503.6), &[]);
    let arrival = intake.arrival().await;
    assert_eq!(
        arrival.measurements[0].value.to_string(),
        "503.6",
        "{arrival:?}"
    );
    intake.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn births_data_and_loss_with_mqtt_5() {
    story(5).await;
}

#[tokio::test(flavor = "multi_thread")]
async fn births_data_and_loss_with_mqtt_3() {
    story(4).await;
}

#[tokio::test(flavor = "multi_thread")]
async fn edge_nodes_alone_need_no_other_connection() {
    let mosquitto = Mosquitto::start();
    let mut intake = Intake::start(mosquitto.port(), 5, EDGE);
    intake.well().await;
    mosquitto.publish("spBv1.0/Q/DDATA/n/d", b"\xff", &[]);
    let arrival = intake.arrival().await;
    assert_eq!(arrival.refusals[0].reason, Reason::Malformed, "{arrival:?}");
    intake
        .receipts
        .send(vec![arrival.receipt])
        .await
        .expect("receipts are taken");
    intake.end().await;
}
