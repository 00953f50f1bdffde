//! The listening connection against a real Mosquitto: sessions, redeliveries, restarts, refusals, TLS.

#[path = "common/certificates.rs"]
mod certificates;
#[path = "common/listening_broker.rs"]
mod mosquitto;

use std::collections::VecDeque;
use std::path::PathBuf;
use std::sync::Arc;
use std::time::Duration;

use evenrow::engine::Condition;
use evenrow::intake::mqtt::{self, Arrival, FromBroker, IntakeError, Receipt};
use evenrow::model::{
    Bank, BankIx, Budget, Characteristic, Layout, Pairing, Reason, Sources, US_PER_DAY,
};
use evenrow::settings::{
    Broker, Feed, PayloadForm, PlantSettings, Protocol, RecordingColumns, Settings, StoreSettings,
    TopicTemplate, WebSettings,
};
use mosquitto::Mosquitto;
use tokio::sync::mpsc;
use tokio_util::sync::CancellationToken;

const PATIENCE: Duration = Duration::from_secs(30);
const BOTH: [Protocol; 2] = [Protocol::V5, Protocol::V4];

fn broker(port: u16, protocol: Protocol) -> Broker {
    Broker {
        host: "127.0.0.1".into(),
        port,
        tls: false,
        client_id: "evenrow-test".into(),
        protocol,
        user: None,
        password_file: None,
        ca_file: None,
        client_certificate_file: None,
        client_key_file: None,
        session_expiry_s: 600,
        receive_maximum: 100,
        most_bytes: 4096,
        keep_alive_s: 5,
    }
}

/// One bank: the topic `line/{source}`, the payload a number.
fn settings(broker: Broker) -> Arc<Settings> {
    let bank = Bank {
        name: "filler".into(),
        equipment: None,
        characteristic: Characteristic {
            name: "net content".into(),
            unit: "g".into(),
            resolution: None,
            target: None,
            declared: None,
            lower: None,
            upper: None,
        },
        sources: Sources::Discover { most: 100 },
        pairing: Pairing::None,
        spans: vec![10],
        look_every_us: 30_000_000,
        margin: 1.0,
        spread_margin: 1.5,
        budget: Budget::new(1.0, 90.0).unwrap(),
        wait_cycles: 3,
        silent_after_us: None,
        oldest_us: 30 * US_PER_DAY,
        layout: Layout::Row,
    };
    let feed = Feed {
        bank: BankIx(0),
        topic: TopicTemplate {
            levels: vec!["line".into(), "{source}".into()],
            source_level: Some(1),
        },
        payload: PayloadForm::Number,
        recording: RecordingColumns::default(),
    };
    Arc::new(Settings {
        plant: PlantSettings {
            name: "Quayside".into(),
            zone: jiff::tz::TimeZone::UTC,
            shifts: Vec::new(),
        },
        broker,
        store: StoreSettings {
            folder: PathBuf::from("unused"),
            keep_days: 1,
        },
        web: WebSettings {
            listen: ([127, 0, 0, 1], 0).into(),
            token_file: None,
            tls_in_front: false,
            address: None,
        },
        banks: vec![Arc::new(bank)],
        feeds: vec![feed],
    })
}

/// A running intake, seen from the daemon's side.
struct Intake {
    feed: mpsc::Receiver<FromBroker>,
    /// What came before the subscriptions were confirmed.
    early: VecDeque<FromBroker>,
    receipts: mpsc::Sender<Vec<Receipt>>,
    shutdown: CancellationToken,
    task: tokio::task::JoinHandle<Result<(), IntakeError>>,
}

impl Intake {
    fn start(broker: Broker, already: Vec<(u16, u64)>, room: usize) -> Self {
        let (feed_in, feed) = mpsc::channel(room);
        let (receipts, receipts_out) = mpsc::channel(16);
        let shutdown = CancellationToken::new();
        let task = tokio::spawn(mqtt::run(
            settings(broker),
            already,
            feed_in,
            receipts_out,
            shutdown.clone(),
        ));
        Self {
            feed,
            early: VecDeque::new(),
            receipts,
            shutdown,
            task,
        }
    }

    /// Waits until the subscriptions are confirmed.
    async fn connected(broker: &Broker, already: Vec<(u16, u64)>) -> Self {
        let mut intake = Self::start(broker.clone(), already, 16);
        let mut early = VecDeque::new();
        loop {
            match intake.next().await {
                FromBroker::Condition(condition) => {
                    assert_eq!(condition, Condition::Well);
                    intake.early = early;
                    return intake;
                }
                arrival => early.push_back(arrival),
            }
        }
    }

    async fn next(&mut self) -> FromBroker {
        if let Some(early) = self.early.pop_front() {
            return early;
        }
        tokio::time::timeout(PATIENCE, self.feed.recv())
            .await
            .expect("something comes in time")
            .expect("intake runs")
    }

    async fn condition(&mut self) -> Condition {
        match self.next().await {
            FromBroker::Condition(condition) => condition,
            FromBroker::Arrival(arrival) => panic!("{arrival:?}"),
        }
    }

    async fn trouble(&mut self, words: &str) {
        match self.condition().await {
            Condition::Trouble(why) => assert!(why.contains(words), "{why}"),
            other => panic!("{other:?}"),
        }
    }

    async fn arrival(&mut self) -> Arrival {
        match self.next().await {
            FromBroker::Arrival(arrival) => arrival,
            FromBroker::Condition(condition) => panic!("{condition:?}"),
        }
    }

    /// The next message, which should be this measurement.
    async fn measured(&mut self, source: &str, value: &str) -> Receipt {
        let arrival = self.arrival().await;
        let [measurement] = arrival.measurements.as_slice() else {
            panic!("{arrival:?}")
        };
        let got = (measurement.source.as_ref(), measurement.value.to_string());
        assert_eq!(got, (source, value.to_owned()));
        arrival.receipt
    }

    /// The next message, which should be refused for this reason.
    async fn refused(&mut self, reason: Reason) -> Receipt {
        let arrival = self.arrival().await;
        let reasons: Vec<_> = arrival.refusals.iter().map(|r| r.reason).collect();
        assert_eq!(reasons, [reason], "{arrival:?}");
        assert!(arrival.measurements.is_empty());
        arrival.receipt
    }

    async fn durable(&self, receipt: Receipt) {
        self.receipts
            .send(vec![receipt])
            .await
            .expect("intake runs");
    }

    async fn nothing_comes(&mut self) {
        assert_eq!(self.early, []);
        let wait = Duration::from_millis(500);
        let got = tokio::time::timeout(wait, self.feed.recv()).await;
        assert!(got.is_err(), "{got:?}");
    }

    async fn end(self) {
        self.shutdown.cancel();
        drop(self.receipts);
        let ended = tokio::time::timeout(PATIENCE, self.task).await;
        ended.expect("in time").expect("no panic").expect("well");
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn what_was_not_acknowledged_comes_again_and_what_was_does_not() {
    for protocol in BOTH {
        let mosquitto = Mosquitto::start();
        let broker = broker(mosquitto.port(), protocol);
        let mut first = Intake::connected(&broker, Vec::new()).await;
        for (source, value) in [("01", "503.1"), ("02", "502.9"), ("03", "503.0")] {
            mosquitto.publish(&["-t", &format!("line/{source}"), "-m", value, "-q", "1"]);
        }
        let acknowledged = first.measured("01", "503.1").await;
        let durable = first.measured("02", "502.9").await;
        first.measured("03", "503.0").await;
        assert_eq!(acknowledged.epoch, 1);
        first.durable(acknowledged).await;
        // Shutting down with the receipts open still acknowledges what is in them.
        first.end().await;

        // 02 was durable before the end, 03 was not.
        let mut second = Intake::connected(&broker, vec![durable.pair().unwrap()]).await;
        let again = second.refused(Reason::Redelivered).await;
        second.durable(again).await;
        let receipt = second.measured("03", "503.0").await;
        second.durable(receipt).await;
        // While nobody listened, the broker kept what was published.
        second.nothing_comes().await;
        second.end().await;
        mosquitto.publish(&["-t", "line/04", "-m", "1", "-q", "1"]);

        let mut third = Intake::connected(&broker, Vec::new()).await;
        let receipt = third.measured("04", "1").await;
        third.durable(receipt).await;
        third.nothing_comes().await;
        third.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_restarted_broker_is_found_again_and_nothing_is_doubled() {
    for protocol in BOTH {
        let mut mosquitto = Mosquitto::start();
        let broker = broker(mosquitto.port(), protocol);
        let mut intake = Intake::connected(&broker, Vec::new()).await;
        for (source, value) in [("01", "1"), ("02", "2")] {
            mosquitto.publish(&["-t", &format!("line/{source}"), "-m", value, "-q", "1"]);
        }
        let under_way = intake.measured("01", "1").await;
        let durable = intake.measured("02", "2").await;
        mosquitto.stop();
        intake
            .trouble(&format!("127.0.0.1:{}", mosquitto.port()))
            .await;
        // Became durable while there was nobody to acknowledge it to.
        intake.durable(durable).await;
        mosquitto.run();
        let mut conditions = Vec::new();
        let again = loop {
            match intake.next().await {
                FromBroker::Condition(condition) => conditions.push(condition),
                FromBroker::Arrival(arrival) => break arrival,
            }
        };
        // 01 is still under way and is not handed on a second time; 02 is refused.
        let reasons: Vec<_> = again.refusals.iter().map(|r| r.reason).collect();
        assert_eq!(reasons, [Reason::Redelivered], "{again:?}");
        intake.durable(again.receipt).await;
        intake.durable(under_way).await;
        if conditions.last() != Some(&Condition::Well) {
            assert_eq!(intake.condition().await, Condition::Well);
        }
        mosquitto.publish(&["-t", "line/03", "-m", "3", "-q", "1"]);
        let receipt = intake.measured("03", "3").await;
        assert!(receipt.epoch > 1);
        intake.durable(receipt).await;
        intake.nothing_comes().await;
        intake.end().await;
        let mut last = Intake::connected(&broker, Vec::new()).await;
        last.nothing_comes().await;
        last.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn retained_messages_are_no_measurements() {
    for protocol in BOTH {
        let mosquitto = Mosquitto::start();
        mosquitto.publish(&["-t", "line/01", "-m", "1", "-q", "1", "-r"]);
        let broker = broker(mosquitto.port(), protocol);
        let mut intake = Intake::connected(&broker, Vec::new()).await;
        if protocol == Protocol::V4 {
            let receipt = intake.refused(Reason::Retained).await;
            intake.durable(receipt).await;
        }
        // Published with the flag, but fresh: it is taken.
        mosquitto.publish(&["-t", "line/01", "-m", "2", "-q", "1", "-r"]);
        let receipt = intake.measured("01", "2").await;
        intake.durable(receipt).await;
        intake.nothing_comes().await;
        intake.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn bad_input_is_refused_and_the_listening_goes_on() {
    for protocol in BOTH {
        let mosquitto = Mosquitto::start();
        let rubbish = mosquitto.file("rubbish");
        std::fs::write(&rubbish, vec![0xfe; 1 << 20]).unwrap();
        let broker = broker(mosquitto.port(), protocol);
        let mut intake = Intake::connected(&broker, Vec::new()).await;
        let file = rubbish.display().to_string();
        for (payload, reason) in [
            (&["-f", file.as_str()][..], Reason::TooLarge),
            (&["-n"], Reason::Empty),
            (&["-m", "NaN"], Reason::NotFinite),
            (&["-m", "1,5"], Reason::NotANumber),
        ] {
            for qos in ["0", "1"] {
                mosquitto.publish(&[&["-t", "line/01", "-q", qos], payload].concat());
                let receipt = intake.refused(reason).await;
                assert_eq!(receipt.packet.is_some(), qos == "1");
                intake.durable(receipt).await;
            }
        }
        mosquitto.publish(&["-t", "line/01", "-m", "1.5", "-q", "1"]);
        intake.measured("01", "1.5").await;
        intake.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_wrong_password_is_said_and_a_right_one_found_later() {
    for protocol in BOTH {
        let mosquitto = Mosquitto::with(|folder| {
            let file = folder.join("passwords");
            let made = std::process::Command::new("mosquitto_passwd")
                .args(["-c", "-b"])
                .arg(&file)
                .args(["evenrow", "right"])
                .status();
            assert!(
                made.is_ok_and(|status| status.success()),
                "mosquitto_passwd"
            );
            format!("allow_anonymous false\npassword_file {}\n", file.display())
        });
        let password = mosquitto.file("password");
        let with = |user: Option<&str>| Broker {
            user: user.map(str::to_owned),
            password_file: user.map(|_| password.clone()),
            ..broker(mosquitto.port(), protocol)
        };
        let mut nobody = Intake::start(with(None), Vec::new(), 16);
        nobody.trouble("set broker.user").await;
        nobody.end().await;
        let mut intake = Intake::start(with(Some("evenrow")), Vec::new(), 16);
        intake.trouble("the password cannot be read from").await;
        std::fs::write(&password, "wrong\n").unwrap();
        intake
            .trouble("check broker.user, broker.password_file")
            .await;
        std::fs::write(&password, "right\n").unwrap();
        assert_eq!(intake.condition().await, Condition::Well);
        intake.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_broker_that_is_not_there_is_said() {
    for protocol in BOTH {
        let port = mosquitto::free_port();
        let mut intake = Intake::start(broker(port, protocol), Vec::new(), 16);
        intake
            .trouble(&format!("nothing listens at 127.0.0.1:{port}"))
            .await;
        intake.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_second_client_of_the_same_name_is_said() {
    let mosquitto = Mosquitto::start();
    let broker = broker(mosquitto.port(), Protocol::V5);
    let mut first = Intake::connected(&broker, Vec::new()).await;
    let second = Intake::connected(&broker, Vec::new()).await;
    first
        .trouble("another client may use the client id 'evenrow-test'")
        .await;
    first.end().await;
    second.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn a_private_authority_and_client_certificates() {
    for protocol in BOTH {
        let mosquitto = Mosquitto::with(|folder| {
            certificates::write(folder);
            let at = folder.display();
            format!(
                "allow_anonymous true\nrequire_certificate true\ncafile {at}/ca.pem\ncertfile {at}/broker.pem\nkeyfile {at}/broker.key\n"
            )
        });
        let other = tempfile::tempdir().unwrap();
        certificates::write(other.path());
        let good = Broker {
            host: "localhost".into(),
            tls: true,
            ca_file: Some(mosquitto.file("ca.pem")),
            client_certificate_file: Some(mosquitto.file("client.pem")),
            client_key_file: Some(mosquitto.file("client.key")),
            ..broker(mosquitto.port(), protocol)
        };
        let mut intake = Intake::connected(&good, Vec::new()).await;
        let file = |name: &str| mosquitto.file(name).display().to_string();
        mosquitto.publish(&[
            "--cafile",
            &file("ca.pem"),
            "--cert",
            &file("client.pem"),
            "--key",
            &file("client.key"),
            "--insecure",
            "-t",
            "line/01",
            "-m",
            "503.1",
            "-q",
            "1",
        ]);
        let receipt = intake.measured("01", "503.1").await;
        intake.durable(receipt).await;
        intake.end().await;

        let stranger = |name: &str| Some(other.path().join(name));
        for (wrong, words) in [
            (
                Broker {
                    ca_file: stranger("ca.pem"),
                    ..good.clone()
                },
                "not signed by the authorities in",
            ),
            (
                Broker {
                    host: "127.0.0.1".into(),
                    ..good.clone()
                },
                "not made out to '127.0.0.1'",
            ),
            (
                Broker {
                    client_certificate_file: None,
                    client_key_file: None,
                    ..good.clone()
                },
                "it wants a client certificate",
            ),
            (
                Broker {
                    client_certificate_file: stranger("client.pem"),
                    client_key_file: stranger("client.key"),
                    ..good.clone()
                },
                "it refuses the client certificate",
            ),
            (
                Broker {
                    client_key_file: None,
                    ..good.clone()
                },
                "go together",
            ),
            (
                Broker {
                    client_key_file: stranger("client.key"),
                    ..good.clone()
                },
                "do not belong together",
            ),
            (
                Broker {
                    ca_file: stranger("client.key"),
                    ..good.clone()
                },
                "holds no certificate",
            ),
            (
                Broker {
                    ca_file: stranger("missing.pem"),
                    ..good.clone()
                },
                "a certificate cannot be read from",
            ),
            (
                Broker {
                    tls: false,
                    ..good.clone()
                },
                "it may speak only TLS there",
            ),
        ] {
            let mut intake = Intake::start(wrong, Vec::new(), 16);
            intake.trouble(words).await;
            intake.end().await;
        }
    }
    let plain = Mosquitto::start();
    let wrong = Broker {
        tls: true,
        ..broker(plain.port(), Protocol::V5)
    };
    let mut intake = Intake::start(wrong, Vec::new(), 16);
    intake.trouble("it may not speak TLS there").await;
    intake.end().await;
}

/// While the engine takes nothing, keep-alive goes on, QoS 1 waits at the broker and nothing is lost.
#[tokio::test(flavor = "multi_thread")]
async fn a_standing_engine_breaks_no_connection() {
    let mosquitto = Mosquitto::start();
    let mut handles = Vec::new();
    for protocol in BOTH {
        let broker = Broker {
            client_id: format!("evenrow-{protocol:?}"),
            receive_maximum: 10,
            ..broker(mosquitto.port(), protocol)
        };
        let mut intake = Intake::start(broker, Vec::new(), 1);
        assert_eq!(intake.condition().await, Condition::Well);
        handles.push(intake);
    }
    let lines: String = (0..200).map(|n| format!("{n}\n")).collect();
    let file = mosquitto.file("lines");
    std::fs::write(&file, lines).unwrap();
    let shell = format!(
        "mosquitto_pub -h 127.0.0.1 -p {} -t line/01 -q 1 -l < {}",
        mosquitto.port(),
        file.display()
    );
    let sent = std::process::Command::new("sh")
        .args(["-c", &shell])
        .status();
    assert!(sent.is_ok_and(|status| status.success()));
    // Mosquitto ends a connection after one and a half keep-alives, here 7.5 s.
    tokio::time::sleep(Duration::from_secs(10)).await;
    for mut intake in handles {
        for n in 0..200 {
            let receipt = intake.measured("01", &n.to_string()).await;
            assert_eq!(receipt.epoch, 1);
            intake.durable(receipt).await;
        }
        intake.nothing_comes().await;
        intake.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn intake_ends_when_nobody_takes() {
    let mosquitto = Mosquitto::start();
    let broker = broker(mosquitto.port(), Protocol::V5);
    let intake = Intake::connected(&broker, Vec::new()).await;
    drop(intake.feed);
    let ended = tokio::time::timeout(PATIENCE, intake.task).await;
    let error = ended.expect("in time").expect("no panic").unwrap_err();
    assert!(matches!(error, IntakeError::NobodyTakes));
}
