//! Facts and the words that must come of them.

use jiff::tz::TimeZone;

use crate::model::{
    Bank, Budget, Characteristic, Layout, Offsets, Pairing, Sources, Time, US_PER_S, Value,
};
use crate::verdict::{Estimate, Pattern, PatternKind, Slip};

use super::{Compared, Facts, Kind, NamedSource, Since, Words};

fn bank() -> Bank {
    Bank {
        name: "filler-2".into(),
        equipment: None,
        characteristic: Characteristic {
            name: "net content".into(),
            unit: "g".into(),
            resolution: Some(0.1),
            target: Value::parse("503").ok(),
            declared: Value::parse("500").ok(),
            lower: None,
            upper: None,
        },
        sources: Sources::Listed(["01", "02", "03", "04"].map(Into::into).to_vec()),
        pairing: Pairing::Cycle,
        spans: vec![10, 40],
        look_every_us: 30 * US_PER_S,
        margin: 0.5,
        spread_margin: 1.5,
        budget: Budget::new(1.0, 90.0).expect("a budget"),
        wait_cycles: 3,
        silent_after_us: None,
        oldest_us: 30 * 86_400 * US_PER_S,
        layout: Layout::Row,
        groups: Vec::new(),
        cost_per_unit: None,
        reference: None,
        offsets: Offsets::None,
    }
}

fn named(source: &str, deviation: f64) -> NamedSource {
    NamedSource {
        source: source.into(),
        deviation,
        low: deviation - 0.25,
        high: deviation + 0.25,
    }
}

fn pattern() -> Pattern {
    Pattern {
        kind: PatternKind::Slope {
            first: "01".into(),
            last: "04".into(),
        },
        effect: Estimate {
            value: 1.5,
            low: 1.2,
            high: 1.8,
        },
        p: 1e-6,
        words: "a slope along the row, rising from 01 to 04".to_owned(),
    }
}

/// The words of one high source among even ones, after `change`.
fn words(bank: &Bank, sources: &[NamedSource], change: impl Fn(&mut Facts)) -> Words {
    let at = Time::from_us(0);
    let zone = TimeZone::UTC;
    let mut facts = Facts {
        bank,
        zone: &zone,
        kind: Kind::LevelApart,
        sources,
        since: Since {
            at,
            earliest: at,
            latest: at,
        },
        others: 3,
        compared: Compared::WithEven,
        even_mean: Some(503.4),
        pattern: None,
        slip: None,
        common_movement: None,
        cost_per_hour: None,
        adjustment: None,
        clears_in_us: None,
        returned: None,
        url: "http://127.0.0.1:7310/banks/filler-2",
    };
    change(&mut facts);
    facts.words()
}

fn check(told: &Words, subject: &str, text: &[&str]) {
    assert_eq!(told.subject, subject);
    for part in text {
        assert!(
            told.text.contains(part),
            "{part:?} is not in\n{}",
            told.text
        );
    }
}

#[test]
fn one_source_is_told_with_its_size_and_step() {
    let told = words(&bank(), &[named("02", 1.0)], |_| {});
    let text = [
        "02: +1.00 g against the 3 even ones",
        "The even ones stand at 503.4",
        "target 503 g, declared 500 g",
        "adjust 02 by −1.00 g",
    ];
    check(&told, "filler-2: 02 is high by 1.00 g", &text);
}

#[test]
fn nobody_is_lowered_while_the_others_are_low() {
    let low = words(&bank(), &[named("02", 1.0)], |f| f.even_mean = Some(501.0));
    let text = ["do not lower 02", "raise the rest by +2.0"];
    check(&low, "filler-2: 02 is high by 1.00 g", &text);
    let level = words(&bank(), &[named("02", 1.0)], |f| f.even_mean = Some(503.0));
    assert!(
        level.advice.contains("judge the bank's level first"),
        "{}",
        level.advice
    );
    let unsure = words(&bank(), &[named("02", 0.6)], |_| {});
    assert!(unsure.advice.contains("not sure yet"), "{}", unsure.advice);
}

#[test]
fn one_cause_is_said_before_the_names() {
    let pattern = pattern();
    let sources = [named("04", 0.8), named("01", -0.8)];
    let told = words(&bank(), &sources, |f| f.pattern = Some(unbounded(&pattern)));
    let text = [
        "rising from 01 to 04, from end to end +1.5",
        "what changes along the row",
    ];
    check(
        &told,
        "filler-2: a slope along the row, rising from 01 to 04",
        &text,
    );
    let (cause, name) = (told.text.find("a slope"), told.text.find("04: +0.8"));
    assert!(cause < name, "{}", told.text);

    let slip = Slip {
        places: 1,
        fit: 0.4,
    };
    let told = words(&bank(), &sources, |f| f.slip = Some(slip));
    let text = ["the position signal may have", "adjust nobody until"];
    check(
        &told,
        "filler-2: every source reads as the one before it",
        &text,
    );
}

/// The facts' own lifetime is that of the sample, which outlives every test here.
fn unbounded(pattern: &Pattern) -> &'static Pattern {
    Box::leak(Box::new(pattern.clone()))
}

#[test]
fn what_it_is_compared_with_and_what_else_happened_is_said() {
    let told = words(&bank(), &[named("02", 1.0)], |f| {
        f.compared = Compared::WithReference("03".into());
        f.common_movement = Some(-0.7);
        f.cost_per_hour = Some(12.5);
    });
    let text = [
        "against 03, the reference",
        "03 stands at 503.4",
        "Since then 03 itself moved by −0.7",
        "gives away 12.50 an hour",
    ];
    check(&told, "filler-2: 02 is high by 1.00 g", &text);
    let told = words(&bank(), &[named("02", 1.0)], |f| {
        f.compared = Compared::WithUsual
    });
    assert!(
        told.text.contains("against its own usual place"),
        "{}",
        told.text
    );
}

#[test]
fn how_a_bank_compares_follows_from_its_configuration() {
    let with = |reference: Option<&str>, offsets| Bank {
        reference: reference.map(Into::into),
        offsets,
        ..bank()
    };
    for (bank, kind, compared) in [
        (bank(), Kind::LevelApart, Compared::WithEven),
        (
            with(None, Offsets::Learn),
            Kind::LevelApart,
            Compared::WithUsual,
        ),
        (
            with(None, Offsets::Learn),
            Kind::SpreadApart,
            Compared::WithEven,
        ),
        (
            with(Some("03"), Offsets::None),
            Kind::LevelApart,
            Compared::WithReference("03".into()),
        ),
        (
            with(Some("03"), Offsets::None),
            Kind::SpreadApart,
            Compared::WithEven,
        ),
    ] {
        assert_eq!(Compared::of(&bank, kind), compared);
    }
}
