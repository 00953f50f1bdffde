//! Tables of payloads and what becomes of them.

use super::*;
use crate::intake::fixture::{fields, inside, json, top};
use crate::settings::{Fields, SourceAt, TimeForm};

mod forms;
mod standards;

const MOST: usize = 4096;

fn us(text: &str) -> Option<Time> {
    Some(Time::parse_rfc3339(text).unwrap())
}

/// Decodes a message that holds one measurement.
fn decode(
    form: &PayloadForm,
    payload: &[u8],
    topic_source: Option<&str>,
    most_bytes: usize,
) -> Result<Decoded<'static>, Fault> {
    let mut all = all(form, payload, topic_source, most_bytes);
    assert_eq!(all.len(), 1, "{all:?}");
    all.remove(0)
}

/// Decodes a message.
fn all(
    form: &PayloadForm,
    payload: &[u8],
    topic_source: Option<&str>,
    most_bytes: usize,
) -> Decodings<'static> {
    let mut reader = Reader::new(form.clone(), most_bytes);
    let now = Time::from_us(0);
    owned(reader.read(Message {
        payload,
        topic_source,
        now,
    }))
}

fn owned(all: Decodings<'_>) -> Decodings<'static> {
    let own = |one: Decoded<'_>| Decoded {
        source: Cow::Owned(one.source.into_owned()),
        ..one
    };
    all.into_iter().map(|one| one.map(own)).collect()
}

/// Decodes and says the value as text, or the reason with its words.
fn outcome(form: &PayloadForm, payload: &[u8]) -> Result<String, (Reason, String)> {
    decode(form, payload, Some("7"), MOST)
        .map(|decoded| decoded.value.to_string())
        .map_err(|fault| (fault.reason, fault.detail))
}

fn refused(form: &PayloadForm, payload: &[u8], reason: Reason, words: &str) {
    let shown = String::from_utf8_lossy(payload);
    match outcome(form, payload) {
        Ok(value) => panic!("{shown:?} became {value}"),
        Err((got, detail)) => {
            assert_eq!(got, reason, "{shown:?}: {detail}");
            assert!(detail.contains(words), "{shown:?}: {detail}");
            assert!(!detail.ends_with('.'), "{detail}");
        }
    }
}

#[test]
fn a_number_is_the_whole_text() {
    for (payload, value) in [
        ("503.1", "503.1"),
        (" 503.10\n", "503.10"),
        ("-0.05", "-0.05"),
        ("1e2", "1e2"),
        ("123456789012345678", "123456789012345678"),
    ] {
        let got = outcome(&PayloadForm::Number, payload.as_bytes());
        assert_eq!(got, Ok(value.to_owned()));
    }
}

#[test]
fn bad_numbers_are_refused_by_reason() {
    for (payload, reason, words) in [
        (&b""[..], Reason::Empty, "no bytes"),
        (b"  \n", Reason::Empty, "blanks"),
        (b"abc", Reason::NotANumber, "'abc' is no number"),
        (b"\"503.1\"", Reason::NotANumber, "without quotation marks"),
        (b"503,1", Reason::NotANumber, "decimal point"),
        (b"{\"v\":1}", Reason::NotANumber, "looks like JSON"),
        (b"NaN", Reason::NotFinite, "not a finite number"),
        (b"-inf", Reason::NotFinite, "not a finite number"),
        (b"1e999", Reason::NotFinite, "not a finite number"),
        (b"503.1\xff", Reason::Malformed, "from byte 6 on"),
    ] {
        refused(&PayloadForm::Number, payload, reason, words);
    }
    refused(
        &PayloadForm::Number,
        &[b'x'; MOST + 1],
        Reason::TooLarge,
        "4097 bytes",
    );
    refused(
        &PayloadForm::Number,
        &[b'9'; MOST],
        Reason::NotFinite,
        "the text is not",
    );
}

#[test]
fn json_numbers_keep_their_digits() {
    let deep = Fields {
        value: inside("/a~1b/1/m~0n"),
        ..fields()
    };
    for (pointers, payload, value) in [
        (fields(), r#"{"v":503.10}"#, "503.10"),
        (
            fields(),
            r#" { "x" : [1,{"v":2}], "v" : 0.30000000000000004 } "#,
            "0.30000000000000004",
        ),
        (fields(), r#"{"\u0076":7}"#, "7"),
        (fields(), r#"{"v":-1.5E1}"#, "-15"),
        (deep, r#"{"a/b":[0,{"m~n":12.5}]}"#, "12.5"),
        (
            Fields {
                value: inside(""),
                ..fields()
            },
            " 42 ",
            "42",
        ),
        (
            Fields {
                value: inside("/"),
                ..fields()
            },
            r#"{"":1}"#,
            "1",
        ),
    ] {
        assert_eq!(
            outcome(&json(pointers), payload.as_bytes()),
            Ok(value.to_owned()),
            "{payload}"
        );
    }
}

/// The examples of RFC 6901 §5.
#[test]
fn pointers_of_the_standard_lead_where_it_says() {
    let document = r#"{"foo": ["bar", "baz"], "": 0, "a/b": 1, "c%d": 2, "e^f": 3, "g|h": 4, "i\\j": 5, "k\"l": 6, " ": 7, "m~n": 8}"#;
    let raw = json::document(document).unwrap();
    for (pointer, found) in [
        ("", Some(document)),
        ("/foo", Some(r#"["bar", "baz"]"#)),
        ("/foo/0", Some("\"bar\"")),
        ("/", Some("0")),
        ("/a~1b", Some("1")),
        ("/c%d", Some("2")),
        ("/e^f", Some("3")),
        ("/g|h", Some("4")),
        ("/i\\j", Some("5")),
        ("/k\"l", Some("6")),
        ("/ ", Some("7")),
        ("/m~0n", Some("8")),
        ("/foo/2", None),
        ("/foo/-", None),
        ("/foo/01", None),
        ("/nowhere", None),
        ("/a~1b/x", None),
    ] {
        let got = json::find(raw, pointer).unwrap().map(|raw| raw.get());
        assert_eq!(got, found, "{pointer:?}");
    }
}

#[test]
fn bad_documents_are_refused_by_reason() {
    for (payload, reason, words) in [
        (&b" "[..], Reason::Empty, "blanks"),
        (b"{", Reason::Malformed, "not valid JSON"),
        (b"503.1", Reason::FieldMissing, "no value at /v"),
        (b"{\"v\":1} x", Reason::Malformed, "not valid JSON"),
        (b"{\"v\":1,\"v\":2}", Reason::Malformed, "stands twice"),
        (b"{\"w\":1}", Reason::FieldMissing, "no value at /v"),
        (b"{\"v\":null}", Reason::FieldMissing, "no value at /v"),
        (
            b"{\"v\":\"503.1\"}",
            Reason::NotANumber,
            "number written as text",
        ),
        (b"{\"v\":\"high\"}", Reason::NotANumber, "the text 'high'"),
        (b"{\"v\":true}", Reason::NotANumber, "is true"),
        (b"{\"v\":[1]}", Reason::NotANumber, "is a list"),
        (b"{\"v\":{}}", Reason::NotANumber, "is an object"),
        (b"{\"v\":NaN}", Reason::NotFinite, "NaN"),
        (b"{\n\"v\": -Infinity}", Reason::NotFinite, "infinities"),
        (b"{\"v\":1e999}", Reason::NotFinite, "finite"),
        (b"{\"v\":01}", Reason::Malformed, "not valid JSON"),
        (b"{\"v\":\"\xc3\x28\"}", Reason::Malformed, "UTF-8"),
    ] {
        refused(&json(fields()), payload, reason, words);
    }
}

#[test]
fn nesting_does_not_touch_the_stack() {
    let deep = "[".repeat(1_000_000);
    let form = json(fields());
    let fault = decode(&form, deep.as_bytes(), Some("7"), usize::MAX).unwrap_err();
    assert_eq!(fault.reason, Reason::Malformed);
    let whole = format!("{{\"x\":{deep}{},\"v\":1}}", "]".repeat(1_000_000));
    assert!(decode(&form, whole.as_bytes(), Some("7"), usize::MAX).is_ok());
}

#[test]
fn sources_come_from_topic_or_payload() {
    let form = json(Fields {
        source: SourceAt::At(top("/head")),
        ..fields()
    });
    for (topic, payload, source) in [
        (None, r#"{"v":1,"head":"07"}"#, Ok("07")),
        (None, r#"{"v":1,"head":7}"#, Ok("7")),
        (None, r#"{"v":1,"head":"H\u00e4 1"}"#, Ok("Hä 1")),
        (Some("3"), r#"{"v":1,"head":"07"}"#, Ok("3")),
        (None, r#"{"v":1}"#, Err(Reason::FieldMissing)),
        (None, r#"{"v":1,"head":""}"#, Err(Reason::FieldMissing)),
        (None, r#"{"v":1,"head":7.5}"#, Err(Reason::UnknownSource)),
        (None, r#"{"v":1,"head":[]}"#, Err(Reason::UnknownSource)),
        (None, r#"{"v":1,"head":"a\nb"}"#, Err(Reason::UnknownSource)),
    ] {
        let got = decode(&form, payload.as_bytes(), topic, MOST);
        let got = got
            .as_ref()
            .map(|d| d.source.as_ref())
            .map_err(|f| f.reason);
        assert_eq!(got, source, "{payload}");
    }
    let long = "x".repeat(MOST_SOURCE_BYTES + 1);
    let got = decode(&PayloadForm::Number, b"1", Some(&long), MOST).unwrap_err();
    assert_eq!(got.reason, Reason::UnknownSource);
    let got = decode(&PayloadForm::Number, b"1", None, MOST).unwrap_err();
    assert_eq!(got.reason, Reason::FieldMissing);
}

#[test]
fn times_are_exact_to_the_microsecond() {
    use TimeForm::{Auto, EpochMilliseconds, EpochSeconds, Rfc3339};
    let at = "2026-03-01T06:00:00.123Z";
    for (form, written, time) in [
        (Auto, r#""2026-03-01T06:00:00.123Z""#, us(at)),
        (Rfc3339, r#""2026-03-01T07:00:00.123+01:00""#, us(at)),
        (Auto, "1772344800.123", us(at)),
        (Auto, "1772344800123", us(at)),
        (Auto, "1772344800123.0009", us(at)),
        (Auto, "1.772344800123e9", us(at)),
        (EpochSeconds, "1772344800.1230000000009", us(at)),
        (EpochMilliseconds, "1772344800123", us(at)),
        (
            EpochSeconds,
            "1772344800123",
            Some(Time::from_us(1_772_344_800_123_000_000)),
        ),
        (EpochMilliseconds, "-1", Some(Time::from_us(-1_000))),
        (Auto, "0", Some(Time::from_us(0))),
        (Auto, "0e99", Some(Time::from_us(0))),
        (
            Auto,
            "99999999999",
            Some(Time::from_us(99_999_999_999_000_000)),
        ),
        (
            Auto,
            "100000000000",
            Some(Time::from_us(100_000_000_000_000)),
        ),
        (Auto, "1e300", None),
        (Auto, "1e99", None),
        (EpochSeconds, "9223372036854.775808", None),
        (Auto, r#""2026-03-01T06:00:00""#, None),
        (Auto, r#""1772344800""#, None),
        (Auto, r#""yesterday""#, None),
        (Auto, "true", None),
        (Rfc3339, "1772344800", None),
        (EpochSeconds, r#""1772344800""#, None),
        (EpochMilliseconds, r#""2026-03-01T06:00:00Z""#, None),
    ] {
        let pointers = Fields {
            time: Some(top("/t")),
            time_form: form.clone(),
            ..fields()
        };
        let payload = format!("{{\"v\":1,\"t\":{written}}}");
        match decode(&json(pointers), payload.as_bytes(), Some("7"), MOST) {
            Ok(decoded) => assert_eq!(decoded.taken, time, "{form:?} {written}"),
            Err(fault) => {
                assert_eq!(
                    (fault.reason, time),
                    (Reason::BadTime, None),
                    "{form:?} {written}: {fault}"
                );
            }
        }
    }
}

#[test]
fn a_local_time_is_told_about_its_offset() {
    let fault = times::from_text("2026-03-01T06:00:00", &TimeForm::Auto).unwrap_err();
    assert!(fault.detail.contains("no offset from UTC"), "{fault}");
    let fault = times::from_cell("2026-03-01 06:00", &TimeForm::Auto).unwrap_err();
    assert!(fault.detail.contains("no offset from UTC"), "{fault}");
}

#[test]
fn cycles_are_whole_numbers() {
    for (written, cycle) in [
        ("12", Some(12)),
        ("12.0", Some(12)),
        ("1.2e1", Some(12)),
        ("-3", Some(-3)),
        ("0.00", Some(0)),
        ("9223372036854775807", Some(i64::MAX)),
        ("9223372036854775808", None),
        ("1e18", Some(1_000_000_000_000_000_000)),
        ("1e19", None),
        ("12.5", None),
        ("1e-120", None),
        ("\"12\"", None),
        ("true", None),
    ] {
        let pointers = Fields {
            cycle: Some(top("/n")),
            ..fields()
        };
        let payload = format!("{{\"v\":1,\"n\":{written}}}");
        match decode(&json(pointers), payload.as_bytes(), Some("7"), MOST) {
            Ok(decoded) => assert_eq!(decoded.cycle, cycle, "{written}"),
            Err(fault) => assert_eq!((fault.reason, cycle), (Reason::BadCycle, None), "{written}"),
        }
    }
}

#[test]
fn excerpts_are_short_and_printable() {
    for (bytes, shown) in [
        (&b"503.1"[..], "503.1".to_owned()),
        (b"a\nb\tc\x1b[2J", "a\\nb\\tc\\u{1b}[2J".to_owned()),
        (b"\xff\xfe", "\u{fffd}\u{fffd}".to_owned()),
        ("\u{202e}x".as_bytes(), "\\u{202e}x".to_owned()),
        (&[b'x'; 120], "x".repeat(120)),
        (&[b'x'; 121], format!("{}…", "x".repeat(119))),
    ] {
        assert_eq!(excerpt(bytes), shown);
    }
}

proptest::proptest! {
    #[test]
    fn no_bytes_panic(bytes in proptest::collection::vec(proptest::prelude::any::<u8>(), 0..200)) {
        let full = Fields {
            source: SourceAt::At(top("/s")), time: Some(top("/t/0")), cycle: Some(top("/n")), ..fields()
        };
        for form in [PayloadForm::Number, json(fields()), json(full)] {
            let _ = decode(&form, &bytes, None, MOST).map(|d| d.value);
        }
        proptest::prop_assert!(excerpt(&bytes).chars().count() <= MOST_EXCERPT);
    }

    #[test]
    fn no_document_panics(v in "[-+0-9.eE\"a-zN]{0,12}", t in "[-+0-9.eE\"T:Z]{0,30}", n in "[-+0-9.eE\"]{0,25}", rest in "[\\[\\]{},:\"0-9]{0,10}") {
        let full = Fields {
            source: SourceAt::At(top("/s")), time: Some(top("/t")), cycle: Some(top("/n")), ..fields()
        };
        let text = format!("{{\"s\":1,\"v\":{v},\"t\":{t},\"n\":{n}{rest}}}");
        let _ = decode(&json(full), text.as_bytes(), None, MOST).map(|d| d.value);
    }

    #[test]
    fn what_is_sent_is_what_is_read(c in -999_999_999_999_i64..999_999_999_999, places in 0_u32..9, n: i64, us in 0_i64..4_000_000_000_000_000) {
        let whole = c / 10_i64.pow(places);
        let part = (c % 10_i64.pow(places)).abs();
        let sign = if c < 0 && whole == 0 { "-" } else { "" };
        let number = if places == 0 { format!("{c}") } else { format!("{sign}{whole}.{part:0>width$}", width = places as usize) };
        let seconds = format!("{}.{:06}", us / 1_000_000, us % 1_000_000);
        let full = Fields { time: Some(top("/t")), cycle: Some(top("/n")), ..fields() };
        let text = format!("{{\"v\":{number},\"t\":{seconds},\"n\":{n}}}");
        let form = json(full);
        let decoded = decode(&form, text.as_bytes(), Some("7"), MOST).unwrap();
        proptest::prop_assert_eq!(decoded.value.to_string(), number);
        proptest::prop_assert_eq!(decoded.taken, Some(Time::from_us(us)));
        proptest::prop_assert_eq!(decoded.cycle, Some(n));
    }
}
