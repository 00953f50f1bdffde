//! Payloads that other people's libraries wrote, decoded as the daemon does: what the sender put in
//! comes out. `fixtures/payloads/make.py` and `make.mjs` made them and name the versions.

use evenrow::intake::arrival::{Decoder, Receipt};
use evenrow::intake::nodes::Nodes;
use evenrow::model::{Measurement, Reason, Refusal, Time, Value};
use evenrow::settings::Settings;

const RECEIPT: Receipt = Receipt {
    epoch: 1,
    packet: None,
    hash: 0,
};

#[derive(serde::Deserialize)]
struct Case {
    made_by: String,
    topic: String,
    payload: String,
    messages: Vec<Message>,
    expected: Vec<Expected>,
    refused: Vec<Reason>,
}

#[derive(serde::Deserialize)]
struct Message {
    topic: String,
    hex: String,
}

#[derive(serde::Deserialize)]
struct Expected {
    source: String,
    value: String,
    ms: Option<i64>,
    cycle: Option<i64>,
}

fn settings(case: &Case) -> Settings {
    let heads: Vec<String> = (1..=12).map(|n| format!("\"{n:02}\"")).collect();
    let text = format!(
        "[plant]\nname = \"Quayside\"\ntime_zone = \"Europe/Lisbon\"\n\
         [broker]\nurl = \"mqtt://127.0.0.1\"\n[store]\nfolder = \"x\"\n\
         [[bank]]\nname = \"f\"\nunit = \"g\"\ntopic = \"{}\"\npayload = {}\nsources = [{}]\n\
         pairing = \"none\"\nmargin = 1\nfalse_calls = \"1 per 90 days\"\n",
        case.topic,
        case.payload,
        heads.join(", ")
    );
    match Settings::parse(&text, "test.toml", []) {
        Ok(settings) => settings,
        Err(faults) => panic!("{}: {faults}", case.made_by),
    }
}

fn bytes(hex: &str) -> Vec<u8> {
    let pair = |at| u8::from_str_radix(&hex[at..at + 2], 16).expect("hexadecimal");
    (0..hex.len()).step_by(2).map(pair).collect()
}

/// Everything that the messages of a case become.
fn decoded(case: &Case) -> (Vec<Measurement>, Vec<Refusal>) {
    let settings = settings(case);
    let mut decoder = Decoder::new(settings.feeds.clone(), 1 << 20);
    let mut nodes = Nodes::new(&settings.feeds, 1 << 20);
    let now = Time::parse_rfc3339("2026-03-01T06:00:01Z").expect("a time");
    let (mut measurements, mut refusals) = (Vec::new(), Vec::new());
    for Message { topic, hex } in &case.messages {
        let arrival = match &mut nodes {
            Some(nodes) => nodes.take(topic, &bytes(hex), now).arrival,
            None => decoder.decode(topic, &bytes(hex), RECEIPT, now),
        };
        measurements.extend(arrival.measurements);
        refusals.extend(arrival.refusals);
    }
    (measurements, refusals)
}

#[test]
fn what_other_libraries_write_is_read_as_they_meant_it() {
    let mut seen = 0;
    for text in [
        include_str!("fixtures/payloads/python.json"),
        include_str!("fixtures/payloads/node.json"),
    ] {
        let cases: Vec<Case> = serde_json::from_str(text).expect("the fixture is JSON");
        for case in cases {
            let made_by = &case.made_by;
            let (measurements, refusals) = decoded(&case);
            let reasons: Vec<Reason> = refusals.iter().map(|refusal| refusal.reason).collect();
            assert_eq!(reasons, case.refused, "{made_by}: {refusals:#?}");
            assert_eq!(measurements.len(), case.expected.len(), "{made_by}");
            for (got, expected) in measurements.iter().zip(&case.expected) {
                let wanted = Value::parse(&expected.value).expect("a value");
                assert_eq!(*got.source, *expected.source, "{made_by}");
                // Exact: a digit more or less would show.
                assert_eq!(got.value.minus(wanted), 0.0, "{made_by}: {got:?}");
                assert!(
                    matches!(got.value, Value::Decimal { .. }),
                    "{made_by}: {got:?}"
                );
                let ms = got.taken.map(|taken| taken.us() / 1000);
                assert_eq!(ms, expected.ms, "{made_by}: {got:?}");
                assert_eq!(got.cycle, expected.cycle, "{made_by}: {got:?}");
                seen += 1;
            }
        }
    }
    assert!(seen > 150, "{seen}");
}
