//! Everything that should not arrive: each kind is refused, counted by reason and shown, and the
//! daemon goes on with what is good.

use std::collections::BTreeMap;

use crate::common::mosquitto::Mosquitto;
use crate::common::running::wait_for;
use crate::daemon::{Plant, SOON, Wanted};
use crate::line::{Line, TOPIC};

/// A day in milliseconds.
const DAY_MS: i64 = 86_400_000;

fn now_ms() -> i64 {
    let since = std::time::UNIX_EPOCH
        .elapsed()
        .expect("it is later than 1970");
    i64::try_from(since.as_millis()).expect("it is before the year 292 million")
}

/// Payloads that are refused and the reason that each must be counted under.
fn rubbish() -> Vec<(Vec<u8>, &'static str)> {
    let now = now_ms();
    let whole = |head: &str, v: &str, ts: &str, n: &str| {
        format!(r#"{{"head":{head},"v":{v},"ts":{ts},"n":{n}}}"#).into_bytes()
    };
    let at = |ms: i64| whole("\"01\"", "503.1", &ms.to_string(), "900001");
    let value = |v: &str| whole("\"01\"", v, &now.to_string(), "900002");
    vec![
        (Vec::new(), "empty"),
        (b"not json at all".to_vec(), "malformed"),
        (vec![0xff, 0xfe, 0x00, 0x80], "malformed"),
        (b"{\"head\":\"01\",\"v\":503.1".to_vec(), "malformed"),
        (vec![b'x'; 1_000_000], "too_large"),
        (
            format!(r#"{{"head":"01","w":503.1,"ts":{now},"n":1}}"#).into_bytes(),
            "field_missing",
        ),
        (value("\"503.1\""), "not_a_number"),
        (value("true"), "not_a_number"),
        (value("null"), "field_missing"),
        (value("[503.1]"), "not_a_number"),
        (value("1e999"), "not_finite"),
        (value("NaN"), "not_finite"),
        (value("Infinity"), "not_finite"),
        (value("-Infinity"), "not_finite"),
        (value("5,1"), "malformed"),
        (value("0x10"), "malformed"),
        (at(0), "too_old"),
        (at(now + 365 * DAY_MS), "too_far_ahead"),
        (
            whole("\"01\"", "503.1", "\"yesterday\"", "900003"),
            "bad_time",
        ),
        (
            whole("\"01\"", "503.1", &now.to_string(), "1.5"),
            "bad_cycle",
        ),
        (
            format!(r#"{{"head":"01","v":503.1,"ts":{now}}}"#).into_bytes(),
            "field_missing",
        ),
        (
            whole("\"99\"", "503.1", &now.to_string(), "900004"),
            "unknown_source",
        ),
    ]
}

#[test]
fn rubbish_of_every_kind_is_refused_by_reason_and_the_daemon_goes_on() {
    let broker = Mosquitto::start();
    let plant = Plant::new(broker.port(), &Wanted::default());
    // Published once, long ago: not a fresh measurement, and never seen as one.
    let mut line = Line::new();
    let old = line.cycles(1, &[]);
    broker.publish(TOPIC, old[0].as_bytes(), &["-r"]);
    let daemon = plant.start_ready();

    let mut wanted: BTreeMap<&str, u64> = BTreeMap::new();
    for (payload, reason) in rubbish() {
        broker.publish(TOPIC, &payload, &[]);
        *wanted.entry(reason).or_default() += 1;
    }
    // Sent twice: taken once.
    let twice = line.cycles(1, &[]);
    broker.publish_lines(TOPIC, &twice);
    broker.publish(TOPIC, twice[0].as_bytes(), &[]);
    *wanted.entry("double").or_default() += 1;
    line.publish(&broker, 99, &[]);

    let refusals = wait_for(SOON, "the double to be counted", || {
        let list = daemon.json("/api/v1/banks/filler-2/refusals");
        let items = list["items"].as_array().expect("a list").clone();
        items
            .iter()
            .any(|r| r["reason"] == "double")
            .then_some(items)
    });
    let counts: BTreeMap<&str, u64> = refusals
        .iter()
        .map(|r| {
            (
                r["reason"].as_str().expect("a reason"),
                r["count"].as_u64().expect("a count"),
            )
        })
        .collect();
    assert_eq!(counts, wanted);
    for refusal in &refusals {
        let text = |key: &str| refusal[key].as_str().expect(key).to_owned();
        // What the window refuses has left its topic behind and is told by its bank.
        let by_window = ["double", "too_old", "too_far_ahead", "unknown_source"]
            .contains(&text("reason").as_str());
        let place = if by_window { "filler-2" } else { TOPIC };
        assert_eq!(text("topic"), place, "{refusal}");
        assert!(!text("detail").is_empty(), "{refusal}");
        assert!(text("excerpt").chars().count() <= 120, "{refusal}");
    }

    // The bank's page shows them, the metrics count them, and the good ones are all there.
    let page = daemon.ask("/banks/filler-2").expect("the page").text;
    assert!(
        page.contains("503.1") || page.contains("yesterday"),
        "the page shows what was refused"
    );
    for (reason, count) in wanted {
        let series =
            format!("evenrow_measurements_total{{bank=\"filler-2\",outcome=\"{reason}\"}}");
        assert!(
            daemon.metric(&series).is_some_and(|v| v >= count as f64),
            "{series}"
        );
    }
    daemon.nothing_is_missing(line.newest());
    let looked = wait_for(SOON, "a look at the good ones", || {
        let bank = daemon.json("/api/v1/banks/filler-2");
        bank["looks"].as_array().filter(|l| !l.is_empty()).cloned()
    });
    assert!(looked.iter().all(|l| l["finding"] == "even"), "{looked:?}");
    daemon.end(&["refused"]);
}
