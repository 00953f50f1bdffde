//! Settings for this room's tests.

use std::path::PathBuf;
use std::sync::Arc;

use crate::model::{Bank, BankIx, Budget, Characteristic, Layout, Pairing, Sources};
use crate::settings::{
    Broker, Feed, JsonPointers, PayloadForm, PlantSettings, Protocol, RecordingColumns, Settings,
    StoreSettings, TimeForm, TopicTemplate, WebSettings,
};

/// A payload that is a number.
pub(super) const NUMBER: fn() -> PayloadForm = || PayloadForm::Number;

/// A payload that names value and source.
pub(super) const JSON: fn() -> PayloadForm = || {
    PayloadForm::Json(JsonPointers {
        value: "/v".into(),
        source: Some("/s".into()),
        time: None,
        time_form: TimeForm::Auto,
        cycle: None,
    })
};

fn feed(bank: usize, topic: &str, payload: PayloadForm) -> Feed {
    let levels: Vec<String> = topic.split('/').map(str::to_owned).collect();
    Feed {
        bank: BankIx(u16::try_from(bank).unwrap()),
        topic: TopicTemplate {
            source_level: levels.iter().position(|level| level == "{source}"),
            levels,
        },
        payload,
        recording: RecordingColumns::default(),
    }
}

/// The broker of the tests: nobody listens there.
pub(super) fn broker() -> Broker {
    Broker {
        host: "127.0.0.1".into(),
        port: 1,
        tls: false,
        client_id: "evenrow-test".into(),
        protocol: Protocol::V5,
        user: None,
        password_file: None,
        ca_file: None,
        client_certificate_file: None,
        client_key_file: None,
        session_expiry_s: 60,
        receive_maximum: 8,
        most_bytes: 4096,
        keep_alive_s: 5,
    }
}

/// Settings with one bank for each topic and form.
pub(super) fn settings(topics: &[(&str, fn() -> PayloadForm)]) -> Arc<Settings> {
    let bank = Bank {
        name: "bank".into(),
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
        oldest_us: 30 * crate::model::US_PER_DAY,
        layout: Layout::Row,
    };
    let feeds = topics.iter().enumerate();
    Arc::new(Settings {
        plant: PlantSettings {
            name: "Quayside".into(),
            zone: jiff::tz::TimeZone::UTC,
            shifts: Vec::new(),
        },
        broker: broker(),
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
        banks: vec![Arc::new(bank); topics.len()],
        feeds: feeds
            .map(|(at, (topic, form))| feed(at, topic, form()))
            .collect(),
    })
}
