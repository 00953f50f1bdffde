//! A running listening connection as the daemon sees it, for tests against a real broker.

use std::collections::VecDeque;
use std::path::PathBuf;
use std::sync::Arc;
use std::time::Duration;

use evenrow::engine::Condition;
use evenrow::intake::mqtt::{self, Arrival, FromBroker, IntakeError, Receipt};
use evenrow::model::{
    Bank, BankIx, Budget, Characteristic, Layout, Offsets, Pairing, Reason, Sources, US_PER_DAY,
};
use evenrow::settings::{
    Belief, Broker, Feed, Origins, PayloadForm, PlantSettings, Protocol, RecordingColumns,
    Settings, StoreSettings, ToldBy, TopicTemplate, WebSettings,
};
use tokio::sync::mpsc;
use tokio_util::sync::CancellationToken;

pub const PATIENCE: Duration = Duration::from_secs(30);
pub const BOTH: [Protocol; 2] = [Protocol::V5, Protocol::V4];

pub fn broker(port: u16, protocol: Protocol) -> Broker {
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
        groups: Vec::new(),
        cost_per_unit: None,
        reference: None,
        offsets: Offsets::None,
    };
    let feed = Feed {
        bank: BankIx(0),
        topic: TopicTemplate {
            levels: vec!["line".into(), "{source}".into()],
            source_level: Some(1),
        },
        payload: PayloadForm::Number,
        belief: Belief::default(),
        recording: RecordingColumns::default(),
        told_by: ToldBy::Message,
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
            certificate_file: None,
            key_file: None,
            address: None,
        },
        manners: evenrow::notice::Manners::default(),
        banks: vec![Arc::new(bank)],
        feeds: vec![feed],
        outlets: Vec::new(),
        origins: Origins::default(),
    })
}

/// A running intake, seen from the daemon's side.
pub struct Intake {
    pub feed: mpsc::Receiver<FromBroker>,
    /// What came before the subscriptions were confirmed.
    early: VecDeque<FromBroker>,
    receipts: mpsc::Sender<Vec<Receipt>>,
    shutdown: CancellationToken,
    pub task: tokio::task::JoinHandle<Result<(), IntakeError>>,
}

impl Intake {
    pub fn start(broker: Broker, already: Vec<(u16, u64)>, room: usize) -> Self {
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
    pub async fn connected(broker: &Broker, already: Vec<(u16, u64)>) -> Self {
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

    pub async fn next(&mut self) -> FromBroker {
        if let Some(early) = self.early.pop_front() {
            return early;
        }
        tokio::time::timeout(PATIENCE, self.feed.recv())
            .await
            .expect("something comes in time")
            .expect("intake runs")
    }

    pub async fn condition(&mut self) -> Condition {
        match self.next().await {
            FromBroker::Condition(condition) => condition,
            FromBroker::Arrival(arrival) => panic!("{arrival:?}"),
        }
    }

    pub async fn trouble(&mut self, words: &str) {
        match self.condition().await {
            Condition::Trouble(why) => assert!(why.contains(words), "{why}"),
            other => panic!("{other:?}"),
        }
    }

    pub async fn arrival(&mut self) -> Arrival {
        match self.next().await {
            FromBroker::Arrival(arrival) => arrival,
            FromBroker::Condition(condition) => panic!("{condition:?}"),
        }
    }

    /// The next message, which should be this measurement.
    pub async fn measured(&mut self, source: &str, value: &str) -> Receipt {
        let arrival = self.arrival().await;
        let [measurement] = arrival.measurements.as_slice() else {
            panic!("{arrival:?}")
        };
        let got = (measurement.source.as_ref(), measurement.value.to_string());
        assert_eq!(got, (source, value.to_owned()));
        arrival.receipt
    }

    /// The next message, which should be refused for this reason.
    pub async fn refused(&mut self, reason: Reason) -> Receipt {
        let arrival = self.arrival().await;
        let reasons: Vec<_> = arrival.refusals.iter().map(|r| r.reason).collect();
        assert_eq!(reasons, [reason], "{arrival:?}");
        assert!(arrival.measurements.is_empty());
        arrival.receipt
    }

    pub async fn durable(&self, receipt: Receipt) {
        self.receipts
            .send(vec![receipt])
            .await
            .expect("intake runs");
    }

    pub async fn nothing_comes(&mut self) {
        assert_eq!(self.early, []);
        let wait = Duration::from_millis(500);
        let got = tokio::time::timeout(wait, self.feed.recv()).await;
        assert!(got.is_err(), "{got:?}");
    }

    pub async fn end(self) {
        self.shutdown.cancel();
        drop(self.receipts);
        let ended = tokio::time::timeout(PATIENCE, self.task).await;
        ended.expect("in time").expect("no panic").expect("well");
    }
}
