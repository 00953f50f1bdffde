//! What conditions say, on a lock screen and in full.

use crate::model::{Budget, Characteristic, Layout, Offsets, Pairing, Sources, Value};

use super::*;

fn bank(name: &str) -> Bank {
    Bank {
        name: name.into(),
        equipment: None,
        characteristic: Characteristic {
            name: "net content".into(),
            unit: "g".into(),
            resolution: Some(0.1),
            target: None,
            declared: Value::parse("500").ok(),
            lower: None,
            upper: None,
        },
        sources: Sources::Listed(vec!["01".into(), "02".into()]),
        pairing: Pairing::Cycle,
        spans: vec![10],
        look_every_us: 30 * US_PER_S,
        margin: 0.5,
        spread_margin: 1.5,
        budget: Budget::new(1.0, 90.0).expect("a budget"),
        wait_cycles: 3,
        silent_after_us: None,
        oldest_us: 1,
        layout: Layout::Row,
        groups: Vec::new(),
        cost_per_unit: None,
        reference: None,
        offsets: Offsets::None,
    }
}

fn at(s: i64) -> Time {
    Time::from_us(s * US_PER_S)
}

fn trouble(source: &str, detail: Detail) -> Trouble {
    Trouble {
        source: (!source.is_empty()).then(|| source.into()),
        since: at(60),
        detail,
    }
}

/// Subject while it holds and after the return; something of the text.
#[track_caller]
fn check(kind: Kind, troubles: &[Trouble], subjects: [&str; 2], part: &str) {
    for (returned, subject) in [None, Some(at(600))].into_iter().zip(subjects) {
        let bank = bank("filler-2");
        let facts = ConditionFacts {
            bank: &bank,
            zone: &TimeZone::UTC,
            kind,
            troubles,
            of: 12,
            now: at(300),
            returned,
            url: "http://127.0.0.1:7310/banks/filler-2",
        };
        let words = facts.words();
        assert_eq!(words.subject, subject);
        assert!(words.text.contains(part), "{}", words.text);
        assert!(words.text.contains("Since 1970-01-01 00:01:00 +00:00"));
        assert_eq!(words.text.contains(&words.advice), returned.is_none());
    }
}

#[test]
fn each_condition_says_what_since_when_and_what_to_do() {
    check(
        Kind::SourceSilent,
        &[trouble("03", Detail::Silent)],
        [
            "filler-2: nothing arrives from 03",
            "filler-2: 03 delivers again",
        ],
        "03: nothing since",
    );
    let all: Vec<Trouble> = (1..=12)
        .map(|n| trouble(&format!("{n:02}"), Detail::Silent))
        .collect();
    check(
        Kind::SourceSilent,
        &all,
        [
            "filler-2: nothing arrives from all 12 sources",
            "filler-2: all 12 sources deliver again",
        ],
        "12: nothing since",
    );
    let stuck = Detail::Stuck {
        value: 503.1,
        times: 41,
    };
    check(
        Kind::SourceStuck,
        &[trouble("07", stuck)],
        ["filler-2: 07 repeats one value", "filler-2: 07 moves again"],
        "503.1 g 41 times in a row",
    );
    check(
        Kind::ClockWrong,
        &[trouble("02", Detail::Ahead { by_us: 90_000_000 })],
        [
            "filler-2: clock of 02 is wrong",
            "filler-2: clock of 02 right again",
        ],
        "taken 90 s after they arrived",
    );
    check(
        Kind::ClockWrong,
        &[trouble("02", Detail::Refused { times: 7 })],
        [
            "filler-2: clock of 02 is wrong",
            "filler-2: clock of 02 right again",
        ],
        "the last 7 values were refused",
    );
    let below = Detail::Below {
        mean: 499.2,
        upper: 499.6,
    };
    check(
        Kind::LevelBelowDeclared,
        &[trouble("", below)],
        [
            "filler-2: level is below declared by 0.80 g",
            "filler-2: level no longer below declared",
        ],
        "499.20 g (surely below 499.60), declared 500 g",
    );
    check(
        Kind::IntakeTrouble,
        &[trouble("", Detail::Intake("no route to it".to_owned()))],
        [
            "filler-2: measurements do not get in",
            "filler-2: measurements arrive and are kept again",
        ],
        "no route to it",
    );
}

#[test]
fn a_subject_fits_a_lock_screen() {
    let long = |n: usize| trouble(&format!("nozzle {n} of the upper row"), Detail::Silent);
    let troubles: Vec<Trouble> = (1..=9).map(long).collect();
    let bank = bank("filler number two");
    let facts = ConditionFacts {
        bank: &bank,
        zone: &TimeZone::UTC,
        kind: Kind::SourceSilent,
        troubles: &troubles,
        of: 12,
        now: at(300),
        returned: None,
        url: "",
    };
    assert_eq!(
        facts.words().subject,
        "filler number two: nothing arrives from 9 sources"
    );
    assert_eq!(facts.sources().len(), 9);
    assert_eq!(facts.sources()[0].deviation, 240.0);
}
