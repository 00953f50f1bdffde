//! The session: births, the sequence, reordering, deaths; and what arbitrary bytes do to it.
//! Payloads of other libraries are in `tests/payloads.rs`.

use prost::Message as _;

use super::wire::{Payload, Property, PropertySet};
use super::*;
use crate::settings::{NameTemplate, Rebirth};

const S: i64 = crate::model::US_PER_S;
const NODE: &str = "spBv1.0/Q/{}/n";
const DEVICE: &str = "spBv1.0/Q/{}/n/d";

fn at(template: &str, kind: &str) -> String {
    template.replace("{}", kind)
}

fn metric(name: &str, value: Given) -> Metric {
    Metric {
        name: Some(name.to_owned()),
        value: Some(value),
        ..Metric::default()
    }
}

fn sent(seq: u64, metrics: Vec<Metric>) -> Vec<u8> {
    Payload {
        timestamp: Some(1000),
        metrics,
        seq: Some(seq),
    }
    .encode_to_vec()
}

fn head(value: f64) -> Vec<Metric> {
    vec![metric("Head 1", Given::Double(value))]
}

/// A session whose node and device are born; the next place is 2.
fn born() -> Session {
    let mut session = Session::new(2 * S, Rebirth::Ask);
    let bd = metric("bdSeq", Given::Long(7));
    assert_eq!(
        session.take(&at(NODE, "NBIRTH"), &sent(0, vec![bd]), now(0)),
        []
    );
    let device = vec![Metric {
        alias: Some(5),
        ..metric("Head 1", Given::Double(9.0))
    }];
    assert_eq!(
        session.take(&at(DEVICE, "DBIRTH"), &sent(1, device), now(0)),
        []
    );
    session
}

fn now(s: i64) -> Time {
    Time::from_us(s * S)
}

fn form() -> SparkplugForm {
    SparkplugForm {
        metric: NameTemplate::new("Head {source}").expect("a template"),
        cycle: None,
        reorder_us: 2 * S,
        rebirth: Rebirth::Ask,
    }
}

/// The told things as short words: values, reasons, "gone", "ask".
fn words(told: Vec<Told>) -> Vec<String> {
    let mut all = Vec::new();
    for one in told {
        match one {
            Told::Data(heard) => {
                for one in measurements(&form(), &heard, None) {
                    all.push(
                        one.map_or_else(|f| f.reason.word().to_owned(), |d| d.value.to_string()),
                    );
                }
            }
            Told::Refused { fault, .. } => all.push(fault.reason.word().to_owned()),
            Told::Gone { device, .. } => all.push(format!("gone {}", device.unwrap_or_default())),
            Told::Ask { topic, payload } => {
                assert_eq!(topic, "spBv1.0/Q/NCMD/n");
                let asked = Payload::decode(payload.as_slice()).expect("a payload");
                assert_eq!(
                    asked.metrics[0].name.as_deref(),
                    Some("Node Control/Rebirth")
                );
                assert_eq!(asked.metrics[0].value, Some(Given::Boolean(true)));
                all.push("ask".to_owned());
            }
        }
    }
    all
}

#[test]
fn topics_are_taken_apart() {
    for (topic, kind) in [
        ("spBv1.0/Q/NBIRTH/n", Some(Kind::NodeBirth)),
        ("spBv1.0/Q/DDATA/n/d", Some(Kind::DeviceData)),
        ("spBv1.0/Q/NDATA/n/d", None),
        ("spBv1.0/Q/DDATA/n", None),
        ("spBv1.0/Q/DDATA/n/d/e", None),
        ("spBv1.0/Q/NCMD/n", None),
        ("spBv1.0/STATE/host", None),
        ("spAv1.0/Q/NDATA/n", None),
        ("", None),
    ] {
        assert_eq!(Address::of(topic).map(|a| a.kind), kind, "{topic}");
    }
}

#[test]
fn messages_are_read_in_the_order_of_the_sequence() {
    let mut session = born();
    let data = at(DEVICE, "DDATA");
    let mut take = |seq, value, s| words(session.take(&data, &sent(seq, head(value)), now(s)));
    assert_eq!(take(2, 2.0, 1), ["2"]);
    assert_eq!(take(5, 5.0, 1), Vec::<String>::new());
    assert_eq!(take(4, 4.0, 2), Vec::<String>::new());
    // Twice the same place, and one that is behind.
    assert_eq!(take(5, 5.5, 2), ["out_of_sequence"]);
    assert_eq!(take(2, 2.5, 2), ["out_of_sequence"]);
    assert_eq!(take(3, 3.0, 2), ["3", "4", "5"]);
    assert_eq!(session.deadline(), None);
}

#[test]
fn what_never_comes_is_given_up_and_the_birth_asked_for() {
    let mut session = born();
    let data = at(DEVICE, "DDATA");
    let mut told = Vec::new();
    for (seq, s) in [(4, 10), (5, 11), (8, 11)] {
        told.extend(session.take(&data, &sent(seq, head(seq as f64)), now(s)));
    }
    assert_eq!(told, []);
    assert_eq!(session.deadline(), Some(now(12)));
    assert_eq!(session.tick(Time::from_us(12 * S - 1)), []);
    assert_eq!(words(session.tick(now(12))), ["4", "5", "ask"]);
    // 8 still waits for 6 and 7, from when it came; the node is not asked again so soon.
    assert_eq!(session.deadline(), Some(now(13)));
    assert_eq!(words(session.tick(now(13))), ["8"]);
    assert_eq!(session.deadline(), None);
    assert_eq!(
        words(session.take(&data, &sent(6, head(6.0)), now(13))),
        ["out_of_sequence"]
    );
}

#[test]
fn the_sequence_runs_on_after_255() {
    let mut session = born();
    let data = at(DEVICE, "DDATA");
    for n in 2..1000_u64 {
        let got = words(session.take(&data, &sent(n % 256, head(n as f64)), now(1)));
        assert_eq!(got, [n.to_string()]);
    }
}

#[test]
fn nothing_is_believed_without_a_birth() {
    let mut session = Session::new(2 * S, Rebirth::Ask);
    let data = at(DEVICE, "DDATA");
    assert_eq!(
        words(session.take(&data, &sent(2, head(1.0)), now(1))),
        ["unborn", "ask"]
    );
    assert_eq!(
        words(session.take(&data, &sent(3, head(1.0)), now(2))),
        ["unborn"]
    );
    assert_eq!(
        words(session.take(&data, &sent(4, head(1.0)), now(12))),
        ["unborn", "ask"]
    );
    let mut quiet = Session::new(2 * S, Rebirth::Wait);
    assert_eq!(
        words(quiet.take(&data, &sent(2, head(1.0)), now(1))),
        ["unborn"]
    );
    // The node is born, the device is not; an alias that no birth gave.
    let mut session = born();
    let other = "spBv1.0/Q/DDATA/n/e";
    assert_eq!(
        words(session.take(other, &sent(2, head(1.0)), now(1))),
        ["unborn"]
    );
    let alias = |alias| Metric {
        alias: Some(alias),
        value: Some(Given::Float(503.1)),
        ..Metric::default()
    };
    let got = session.take(
        &data,
        &sent(3, vec![alias(5), alias(6), Metric::default()]),
        now(1),
    );
    assert_eq!(words(got), ["unborn", "unborn", "503.1"]);
}

#[test]
fn deaths_end_what_was_known() {
    let mut session = born();
    let data = at(DEVICE, "DDATA");
    let death = |bd| {
        let metrics = vec![metric("bdSeq", Given::Long(bd))];
        Payload {
            timestamp: None,
            metrics,
            seq: None,
        }
        .encode_to_vec()
    };
    // The will of an earlier session.
    assert_eq!(session.take(&at(NODE, "NDEATH"), &death(6), now(1)), []);
    assert_eq!(
        words(session.take(&data, &sent(2, head(1.0)), now(1))),
        ["1"]
    );
    assert_eq!(
        words(session.take(&at(DEVICE, "DDEATH"), &sent(3, Vec::new()), now(1))),
        ["gone d"]
    );
    assert_eq!(
        words(session.take(&data, &sent(4, head(1.0)), now(1))),
        ["unborn"]
    );
    assert_eq!(
        words(session.take(&at(NODE, "NDEATH"), &death(7), now(1))),
        ["gone "]
    );
    assert_eq!(session.take(&at(NODE, "NDEATH"), &death(7), now(1)), []);
    assert_eq!(
        words(session.take(&data, &sent(5, head(1.0)), now(1))),
        ["unborn", "ask"]
    );
    let mut again = born();
    assert_eq!(again.take(&data, &sent(4, head(1.0)), now(1)), []);
    again.connected();
    assert_eq!(
        (
            again.deadline(),
            words(again.take(&data, &sent(2, head(1.0)), now(1)))
        ),
        (None, vec!["unborn".to_owned(), "ask".to_owned()])
    );
}

#[test]
fn broken_messages_are_refused() {
    let mut session = born();
    let no_place = Payload {
        timestamp: None,
        metrics: head(1.0),
        seq: None,
    }
    .encode_to_vec();
    for (topic, payload, word) in [
        (at(DEVICE, "DDATA"), b"\xff\xff".to_vec(), "malformed"),
        (at(DEVICE, "DDATA"), no_place.clone(), "malformed"),
        (at(DEVICE, "DDATA"), sent(256, head(1.0)), "malformed"),
        (at(NODE, "NBIRTH"), no_place, "malformed"),
    ] {
        assert_eq!(words(session.take(&topic, &payload, now(1))), [word]);
    }
    assert_eq!(
        words(session.take(&at(DEVICE, "DDATA"), &sent(2, head(1.0)), now(1))),
        ["1"]
    );
}

#[test]
fn values_of_every_kind() {
    let property = |code| PropertySet {
        keys: vec!["Quality".to_owned()],
        values: vec![Property { int_value: code }],
    };
    let plain = metric("Head 1", Given::Double(1.5));
    for (metric, expected) in [
        (plain.clone(), "1.5"),
        (metric("Head 1", Given::Float(0.1)), "0.1"),
        (
            metric("Head 1", Given::Double(0.1 + 0.2)),
            "0.30000000000000004",
        ),
        (metric("Head 1", Given::Double(f64::NAN)), "not_finite"),
        (metric("Head 1", Given::Float(f32::INFINITY)), "not_finite"),
        (
            Metric {
                datatype: Some(1),
                ..metric("Head 1", Given::Int(0xfb))
            },
            "-5",
        ),
        (
            Metric {
                datatype: Some(2),
                ..metric("Head 1", Given::Int(0xffff_fffb))
            },
            "-5",
        ),
        (
            Metric {
                datatype: Some(7),
                ..metric("Head 1", Given::Int(0xffff_fffb))
            },
            "4294967291",
        ),
        (
            Metric {
                datatype: Some(8),
                ..metric("Head 1", Given::Long(u64::MAX))
            },
            "18446744073709552000",
        ),
        (metric("Head 1", Given::Boolean(true)), "not_a_number"),
        (
            Metric {
                value: None,
                ..plain.clone()
            },
            "not_a_number",
        ),
        (
            Metric {
                is_null: Some(true),
                ..plain.clone()
            },
            "field_missing",
        ),
        (
            Metric {
                properties: Some(property(Some(192))),
                ..plain.clone()
            },
            "1.5",
        ),
        (
            Metric {
                properties: Some(property(Some(500))),
                ..plain.clone()
            },
            "bad_quality",
        ),
        (
            Metric {
                properties: Some(property(None)),
                ..plain.clone()
            },
            "bad_quality",
        ),
        (
            Metric {
                timestamp: Some(u64::MAX),
                ..plain.clone()
            },
            "bad_time",
        ),
        (
            Metric {
                is_historical: Some(true),
                ..plain.clone()
            },
            "bad_time",
        ),
        (
            Metric {
                is_historical: Some(true),
                timestamp: Some(5),
                ..plain
            },
            "1.5",
        ),
    ] {
        let mut session = born();
        let shown = format!("{metric:?}");
        let got = words(session.take(&at(DEVICE, "DDATA"), &sent(2, vec![metric]), now(1)));
        assert_eq!(got, [expected], "{shown}");
    }
}

proptest::proptest! {
    /// A node that sends in order over a line that reorders and loses: what comes out is in order, and
    /// whatever was not lost comes out when each waits less than the timeout.
    #[test]
    fn order_survives_the_line(lost in proptest::collection::vec(proptest::bool::weighted(0.05), 100), swaps in proptest::collection::vec((0_usize..99, 1_usize..5), 0..40)) {
        let mut session = born();
        let mut line: Vec<u64> = (0..100).filter(|n| !lost[usize::try_from(*n).unwrap()]).collect();
        for (at, by) in swaps {
            let (a, b) = (at % line.len().max(1), (at + by) % line.len().max(1));
            if a < line.len() && a.abs_diff(b) < 6 {
                line.swap(a, b);
            }
        }
        let mut out = Vec::new();
        for (s, n) in (0_i64..).zip(&line) {
            let time = Time::from_us(s * S / 10);
            out.extend(words(session.take(&at(DEVICE, "DDATA"), &sent((n + 2) % 256, head(*n as f64)), time)));
            out.extend(words(session.tick(time)));
        }
        out.extend(words(session.tick(now(1000))));
        while session.deadline().is_some() {
            out.extend(words(session.tick(now(1000))));
        }
        let values: Vec<u64> = out.iter().filter_map(|w| w.parse().ok()).collect();
        proptest::prop_assert!(values.windows(2).all(|w| w[0] < w[1]), "{:?}", out);
        let refused = out.iter().filter(|w| *w == "out_of_sequence").count();
        proptest::prop_assert_eq!(values.len() + refused, line.len(), "{:?}", out);
    }

    #[test]
    fn no_bytes_panic(kinds in proptest::collection::vec((0_usize..6, proptest::collection::vec(proptest::prelude::any::<u8>(), 0..60), 0_i64..20), 0..20)) {
        let mut session = born();
        for (kind, bytes, s) in kinds {
            let kind = ["NBIRTH", "DBIRTH", "NDATA", "DDATA", "NDEATH", "DDEATH"][kind];
            let topic = at(if kind.starts_with('N') { NODE } else { DEVICE }, kind);
            for told in session.take(&topic, &bytes, now(s)).into_iter().chain(session.tick(now(s))) {
                if let Told::Data(heard) = told {
                    let _ = measurements(&form(), &heard, None);
                }
            }
        }
    }
}
