//! The forms that hold more than one measurement, and what is made of arbitrary bytes.

use super::*;
use crate::model::Name;
use crate::settings::{
    CsvForm, DecimalMark, Items, JsonForm, NameTemplate, OpcUaForm, SenMlForm, Turn, UnitAt,
};

/// What came out: "source value time-in-us cycle" or the reason with its words.
pub(super) type Said = Result<String, (Reason, String)>;

pub(super) fn said(all: Decodings<'_>) -> Vec<Said> {
    let number = |n: Option<i64>| n.map_or("-".to_owned(), |n| n.to_string());
    let one = |one: Result<Decoded<'_>, Fault>| {
        one.map(|d| {
            format!(
                "{} {} {} {}",
                d.source,
                d.value,
                number(d.taken.map(Time::us)),
                number(d.cycle)
            )
        })
        .map_err(|fault| (fault.reason, fault.detail))
    };
    all.into_iter().map(one).collect()
}

/// Checks what a payload becomes, item by item; of a refusal the reason and some words.
pub(super) fn check(form: &PayloadForm, payload: &str, expected: &[Result<&str, (Reason, &str)>]) {
    let got = said(all(form, payload.as_bytes(), None, MOST));
    assert_eq!(got.len(), expected.len(), "{payload}: {got:#?}");
    for (got, expected) in got.iter().zip(expected) {
        match (got, expected) {
            (Ok(got), Ok(expected)) => assert_eq!(got, expected, "{payload}"),
            (Err((reason, detail)), Err((wanted, words))) => {
                assert_eq!(reason, wanted, "{payload}: {detail}");
                assert!(detail.contains(words), "{payload}: {detail}");
            }
            _ => panic!("{payload}: {got:?}, not {expected:?}"),
        }
    }
}

fn several(items: Items, fields: Fields<crate::settings::Pointer>) -> PayloadForm {
    PayloadForm::Json(JsonForm { items, fields })
}

fn turn() -> Turn {
    let names = ["01", "02", "03"].map(Name::from).to_vec();
    Turn::new(names, 1).expect("a turn")
}

pub(super) fn list() -> PayloadForm {
    several(
        Items::List("/l".into()),
        Fields {
            source: SourceAt::At(inside("/id")),
            time: Some(top("/t")),
            cycle: Some(inside("/n")),
            unit: Some(UnitAt {
                at: inside("/u"),
                wanted: "g".into(),
            }),
            ..fields()
        },
    )
}

pub(super) fn by_source(at: &str) -> PayloadForm {
    several(
        Items::BySource(at.into()),
        Fields {
            value: inside(""),
            source: SourceAt::Member,
            time: Some(top("/t")),
            cycle: Some(top("/meta/n")),
            ..fields()
        },
    )
}

pub(super) fn csv(decimal: DecimalMark) -> PayloadForm {
    PayloadForm::Csv(CsvForm {
        fields: Fields {
            value: 2,
            source: SourceAt::At(1),
            time: Some(0),
            time_form: TimeForm::Auto,
            cycle: Some(3),
            unit: None,
        },
        header: ["time", "head", "net", "n"].map(str::to_owned).to_vec(),
        separator: b';',
        decimal,
    })
}

fn template(text: &str) -> NameTemplate {
    NameTemplate::new(text).expect("a template")
}

pub(super) fn senml(cycle: Option<&str>) -> PayloadForm {
    PayloadForm::SenMl(SenMlForm {
        name: template("urn:f:head{source}"),
        cycle: cycle.map(str::to_owned),
        unit: "g".into(),
    })
}

pub(super) fn opc_ua() -> PayloadForm {
    PayloadForm::OpcUaJson(OpcUaForm {
        field: template("Head{source}"),
        source: None,
        cycle: Some("Cycle".into()),
        writer: Some("w".into()),
    })
}

#[test]
fn a_list_holds_measurements_and_one_bad_item_costs_no_other() {
    check(
        &list(),
        r#"{"t":1,"l":[{"id":"01","v":503.10,"n":7,"u":"g"},{"id":2,"v":"x","n":7,"u":"g"},
            {"id":3,"v":1,"n":7,"u":"kg"},{"id":4,"v":1,"u":"g"},{"v":1,"n":1,"u":"g"},5,
            {"id":"a\u00e4","v":1e2,"n":8,"u":"\u0067"},{"id":7,"v":1,"n":1,"u":3}]}"#,
        &[
            Ok("01 503.10 1000000 7"),
            Err((Reason::NotANumber, "item 2: the value is the text 'x'")),
            Err((
                Reason::WrongUnit,
                "item 3: the unit is 'kg', and 'g' is expected",
            )),
            Err((Reason::FieldMissing, "item 4: there is no cycle at /n")),
            Err((Reason::FieldMissing, "item 5: there is no source")),
            Err((Reason::FieldMissing, "item 6: there is no cycle")),
            Ok("aä 1e2 1000000 8"),
            Err((Reason::WrongUnit, "not text")),
        ],
    );
    for (payload, reason, words) in [
        (r#"{"l":[]}"#, Reason::FieldMissing, "no time"),
        (
            r#"{"t":1,"l":[]}"#,
            Reason::FieldMissing,
            "holds no measurement",
        ),
        (r#"{"t":1,"l":{}}"#, Reason::Malformed, "is no list"),
        (r#"{"t":1}"#, Reason::FieldMissing, "no list at /l"),
        (
            r#"{"t":"x","l":[{"id":1,"v":1}]}"#,
            Reason::BadTime,
            "cannot be read",
        ),
    ] {
        check(&list(), payload, &[Err((reason, words))]);
    }
}

#[test]
fn an_object_is_named_by_its_sources() {
    let payload = r#"{"01":503.1,"meta":{"n":4},"t":2,"02":null,"0\u0033":"x","04":5.20}"#;
    check(
        &by_source(""),
        payload,
        &[
            Ok("01 503.1 2000000 4"),
            Err((
                Reason::FieldMissing,
                "source '02': there is no value where one should stand",
            )),
            Err((Reason::NotANumber, "source '03'")),
            Ok("04 5.20 2000000 4"),
        ],
    );
    let inner = r#"{"heads":{"t":1,"01":2},"t":2,"meta":{"n":4}}"#;
    check(
        &by_source("/heads"),
        inner,
        &[Ok("t 1 2000000 4"), Ok("01 2 2000000 4")],
    );
    for (payload, reason, words) in [
        (
            r#"{"01":1,"01":2,"t":2,"meta":{"n":4}}"#,
            Reason::Malformed,
            "stands twice",
        ),
        (
            r#"{"t":2,"meta":{"n":4}}"#,
            Reason::FieldMissing,
            "no measurement",
        ),
        (r#"[1]"#, Reason::FieldMissing, "no time"),
    ] {
        check(&by_source(""), payload, &[Err((reason, words))]);
    }
}

#[test]
fn source_and_cycle_follow_from_a_counter() {
    let counted = json(Fields {
        source: SourceAt::Counted {
            counter: top("/n"),
            turn: turn(),
        },
        ..fields()
    });
    check(&counted, r#"{"v":1,"n":0}"#, &[Ok("02 1 - 0")]);
    check(&counted, r#"{"v":1,"n":8}"#, &[Ok("01 1 - 2")]);
    check(
        &counted,
        r#"{"v":1,"n":8.5}"#,
        &[Err((Reason::BadCycle, "8.5"))],
    );
    check(
        &counted,
        r#"{"v":1}"#,
        &[Err((Reason::FieldMissing, "no counter at /n"))],
    );
    let each = several(
        Items::List(String::new()),
        Fields {
            source: SourceAt::Counted {
                counter: inside("/n"),
                turn: turn(),
            },
            ..fields()
        },
    );
    check(
        &each,
        r#"[{"v":1,"n":2},{"v":2,"n":3}]"#,
        &[Ok("01 1 - 0"), Ok("02 2 - 1")],
    );
}

#[test]
fn more_items_than_memory_allows_are_refused_as_one() {
    let many = |item: &str| {
        format!(
            "{{\"t\":1,\"l\":[{}{item}]}}",
            format!("{item},").repeat(MOST_ITEMS)
        )
    };
    let got = said(all(&list(), many("1").as_bytes(), None, usize::MAX));
    assert!(
        matches!(got.as_slice(), [Err((Reason::Malformed, words))] if words.contains("10000")),
        "{got:?}"
    );
    let lines = "1;1;1;1\n".repeat(MOST_ITEMS + 1);
    let got = said(all(
        &csv(DecimalMark::Point),
        lines.as_bytes(),
        None,
        usize::MAX,
    ));
    assert!(
        matches!(got.as_slice(), [Err((Reason::TooLarge, _))]),
        "{got:?}"
    );
}

#[test]
fn lines_are_measurements() {
    let form = csv(DecimalMark::Comma);
    check(
        &form,
        "time;head;net;n\r\n1;01;503,10;7\r\n\r\n 2 ; 02 ; -1 ; 8 \n",
        &[Ok("01 503.10 1000000 7"), Ok("02 -1 2000000 8")],
    );
    check(
        &form,
        "1;01;503.1;7\n1;\"0;2\";5;7\n1;03\nx;04;1;7\n1;05;1;x\n1;06;1,0,0;1\n1;07;;1\ntime;head;net;n",
        &[
            Err((Reason::NotANumber, "line 1: '503.1' has a point")),
            Ok("0;2 5 1000000 7"),
            Err((
                Reason::FieldMissing,
                "line 3: there is no cycle in column 4",
            )),
            Err((Reason::BadTime, "line 4")),
            Err((Reason::BadCycle, "line 5")),
            Err((
                Reason::NotANumber,
                "line 6: '1,0,0' has more than one comma",
            )),
            Err((
                Reason::FieldMissing,
                "line 7: there is no value in column 3",
            )),
            // A header that is not the first line is a line.
            Err((Reason::BadCycle, "line 8")),
        ],
    );
    check(
        &csv(DecimalMark::Point),
        "1;1;503,1;1",
        &[Err((Reason::NotANumber, "decimal point"))],
    );
    check(
        &form,
        "time;head;net;n\n",
        &[Err((Reason::Empty, "no line"))],
    );
    check(&form, " \n ", &[Err((Reason::Empty, "no line"))]);
}

#[test]
fn local_times_are_read_by_the_plants_zone() {
    let zone = jiff::tz::TimeZone::get("Europe/Lisbon").expect("a zone");
    let local = TimeForm::Local(zone);
    for (text, utc) in [
        ("2026-07-01T06:00:00", Ok("2026-07-01T05:00:00Z")),
        ("2026-01-01 06:00:00.25", Ok("2026-01-01T06:00:00.25Z")),
        ("2026-10-25T01:30:00", Err("two moments or none")),
        ("2026-03-29T01:30:00", Err("two moments or none")),
        ("2026-07-01T06:00:00Z", Err("")),
        ("yesterday", Err("cannot be read")),
    ] {
        match (times::from_text(text, &local), utc) {
            (Ok(time), Ok(utc)) => assert_eq!(Some(time), us(utc), "{text}"),
            (Err(fault), Err(words)) => assert!(fault.detail.contains(words), "{text}: {fault}"),
            (got, _) => panic!("{text}: {got:?}"),
        }
    }
    assert!(times::from_number("1772344800", &local).is_err());
}

/// One form of each kind, with everything that it can hold.
fn every_form() -> [PayloadForm; 9] {
    let counted = several(
        Items::List("/l".into()),
        Fields {
            source: SourceAt::Counted {
                counter: inside("/n"),
                turn: turn(),
            },
            ..fields()
        },
    );
    [
        PayloadForm::Number,
        list(),
        by_source(""),
        by_source("/l"),
        counted,
        csv(DecimalMark::Comma),
        csv(DecimalMark::Point),
        senml(Some("urn:f:turn")),
        opc_ua(),
    ]
}

/// Text that comes close to what the forms expect.
const CLOSE: &str = r#"[\[\]{},:;"\n]{0,4}|"(t|l|n|v|u|id|bn|bt|bv|bver|Head1|Cycle|Payload|Messages|Value|UaType|Status|meta|urn:f:head1)"|[:,]|-?[0-9]{1,4}(\.[0-9]{1,3})?(e-?[0-9]{1,3})?|null|\\u00e4"#;

proptest::proptest! {
    #[test]
    fn no_bytes_panic_in_any_form(bytes in proptest::collection::vec(proptest::prelude::any::<u8>(), 0..300)) {
        for form in every_form() {
            let _ = all(&form, &bytes, None, MOST);
        }
    }

    #[test]
    fn no_text_panics_in_any_form(parts in proptest::collection::vec(CLOSE, 0..40)) {
        let text = parts.concat();
        for form in every_form() {
            for open in [text.clone(), format!("{{{text}}}"), format!("[{{{text}}}]"), format!("{{\"t\":1,\"l\":[{{{text}}}]}}")] {
                let out = all(&form, open.as_bytes(), None, MOST);
                proptest::prop_assert!(out.len() <= open.len() + 1);
            }
        }
    }
}
