//! The forms of published standards, rule by rule; `tests/payloads.rs` shows what libraries write.

use super::forms::{check, opc_ua, said, senml};
use super::*;

/// RFC 8428, the examples of §5.1.1 to §5.1.5 with other names, and its rules one by one.
#[test]
fn senml_packs_are_resolved() {
    let now = 1_772_344_800;
    let mut reader = Reader::new(senml(None), MOST);
    let mut read = |payload: &str| {
        let message = Message {
            payload: payload.as_bytes(),
            topic_source: None,
            now: Time::from_us(now * 1_000_000),
        };
        said(reader.read(message))
    };
    for (payload, expected) in [
        (r#"[{"n":"urn:f:head1","u":"g","v":23.10}]"#, "1 23.10 - -"),
        (
            r#"[{"bn":"urn:f:","n":"head1","u":"g","v":120.1},{"n":"other","v":3}]"#,
            "1 120.1 - -",
        ),
        (
            r#"[{"bn":"urn:f:","bt":1.276020076001e9,"bu":"g","bver":5,"n":"head1","v":120.1}]"#,
            "1 120.1 1276020076001000 -",
        ),
        (
            r#"[{"bn":"urn:f:head1","bt":1276020000,"v":1,"t":-5.5}]"#,
            "1 1 1276019994500000 -",
        ),
        (
            r#"[{"bn":"urn:f:head1","v":1,"t":-5}]"#,
            "1 1 1772344795000000 -",
        ),
        (
            r#"[{"bn":"urn:f:head1","v":0.1,"bv":500,"s":1,"ut":3}]"#,
            "1 500.1 - -",
        ),
        (r#"[{"bn":"urn:f:head1","v":0.1,"bv":1e30}]"#, "1 1e30 - -"),
    ] {
        assert_eq!(read(payload).len(), 1, "{payload}");
        let got = read(payload).remove(0).expect(payload);
        let same = |a: &str, b: &str| {
            let parts = |t: &str| t.split(' ').map(str::to_owned).collect::<Vec<_>>();
            let (a, b) = (parts(a), parts(b));
            let value = |t: &str| Value::parse(t).unwrap().to_f64();
            a[0] == b[0] && value(&a[1]) == value(&b[1]) && a[2..] == b[2..]
        };
        assert!(same(&got, expected), "{payload}: {got}");
    }
    for (payload, reason, words) in [
        (
            r#"[{"n":"urn:f:head1","u":"kg","v":1}]"#,
            Reason::WrongUnit,
            "'kg'",
        ),
        (
            r#"[{"bn":"urn:f:","bu":"kg","n":"head1","v":1}]"#,
            Reason::WrongUnit,
            "'kg'",
        ),
        (
            r#"[{"n":"urn:f:head1","vs":"high"}]"#,
            Reason::NotANumber,
            "no number",
        ),
        (
            r#"[{"n":"urn:f:head1","v":"1"}]"#,
            Reason::NotANumber,
            "written as text",
        ),
        (
            r#"[{"bver":11,"n":"urn:f:head1","v":1}]"#,
            Reason::Malformed,
            "version '11'",
        ),
        (
            r#"[{"must_":1,"n":"urn:f:head1","v":1}]"#,
            Reason::Malformed,
            "must be understood",
        ),
        (
            r#"[{"n":"other","v":1}]"#,
            Reason::FieldMissing,
            "there are 'other'",
        ),
        (r#"[]"#, Reason::FieldMissing, "there are none"),
        (
            r#"{"n":"urn:f:head1","v":1}"#,
            Reason::Malformed,
            "is a list",
        ),
        (r#"[1]"#, Reason::Malformed, "is an object"),
        (r#"[{"n":1,"v":1}]"#, Reason::Malformed, "`n` is"),
        (r#"[{"bt":"x","v":1}]"#, Reason::Malformed, "`bt` is"),
        (
            r#"[{"n":"urn:f:head1","t":1e300,"v":1}]"#,
            Reason::BadTime,
            "out of range",
        ),
    ] {
        check(&senml(None), payload, &[Err((reason, words))]);
    }
    let cycle = senml(Some("urn:f:turn"));
    check(
        &cycle,
        r#"[{"bn":"urn:f:","n":"head1","v":1},{"n":"turn","v":7},{"n":"head2","v":2}]"#,
        &[
            Err((Reason::FieldMissing, "no record with the cycle")),
            Ok("2 2 - 7"),
        ],
    );
}

/// What `tests/payloads.rs` does not show: whose messages are meant, what is remembered, what is broken.
#[test]
fn opc_ua_messages_are_told_apart() {
    let mut reader = Reader::new(opc_ua(), MOST);
    let mut read = |payload: &str| {
        let message = Message {
            payload: payload.as_bytes(),
            topic_source: None,
            now: Time::from_us(0),
        };
        said(reader.read(message))
    };
    let set = |writer: &str, kind: &str, payload: &str| {
        format!(r#"{{"DataSetWriterName":"{writer}","MessageType":"{kind}","Payload":{payload}}}"#)
    };
    let missing = read(&set("w", "ua-deltaframe", r#"{"Head1":1}"#));
    assert!(
        matches!(missing.as_slice(), [Err((Reason::FieldMissing, w))] if w.contains("cycle")),
        "{missing:?}"
    );
    assert_eq!(
        read(&set("w", "ua-keyframe", r#"{"Head1":1,"Cycle":"41"}"#)),
        [Ok("1 1 - 41".into())]
    );
    assert_eq!(
        read(&set("v", "ua-keyframe", r#"{"Head1":1,"Cycle":9}"#)),
        []
    );
    assert_eq!(
        read(&set("w", "ua-deltaframe", r#"{"Head1":2}"#)),
        [Ok("1 2 - 41".into())]
    );
    assert_eq!(read(&set("w", "ua-deltaframe", r#"{"Cycle":42}"#)), []);
    assert_eq!(
        read(&set("w", "ua-deltaframe", r#"{"Head1":3}"#)),
        [Ok("1 3 - 42".into())]
    );
    assert_eq!(read(r#"{"MessageType":"ua-metadata","MetaData":{}}"#), []);
    assert_eq!(
        read(r#"{"DataSetWriterName":"w","MessageType":"ua-keepalive"}"#),
        []
    );
    for (payload, reason, words) in [
        ("7".to_owned(), Reason::Malformed, "an object or a list"),
        ("[7]".to_owned(), Reason::Malformed, "message is an object"),
        (
            set("w", "ua-keyframe", "7"),
            Reason::Malformed,
            "payload of a data set",
        ),
        (
            set("w", "ua-keyframe", r#"{"Cycle":1}"#),
            Reason::FieldMissing,
            "no field \"Head{source}\"",
        ),
        (
            set("w", "ua-deltaframe", r#"{"Cycle":"x"}"#),
            Reason::BadCycle,
            "'x'",
        ),
        (
            set("w", "ua-deltaframe", r#"{"Head1":"1.5"}"#),
            Reason::NotANumber,
            "written as text",
        ),
        (
            set("w", "ua-deltaframe", r#"{"Head1":"NaN"}"#),
            Reason::NotFinite,
            "not a finite",
        ),
        (
            set(
                "w",
                "ua-deltaframe",
                r#"{"Head1":{"Value":1,"Status":"x"}}"#,
            ),
            Reason::BadQuality,
            "no number",
        ),
        (
            set("w", "ua-deltaframe", r#"{"Head1":{"Value":[1]}}"#),
            Reason::NotANumber,
            "a list",
        ),
        (
            set(
                "w",
                "ua-deltaframe",
                r#"{"Head1":{"Value":1,"Status":2147483648}}"#,
            ),
            Reason::BadQuality,
            "bad (status 0x80000000)",
        ),
        (
            set(
                "w",
                "ua-deltaframe",
                r#"{"Head1":{"Value":1,"SourceTimestamp":7}}"#,
            ),
            Reason::BadTime,
            "number",
        ),
        (
            set("w", "ua-deltaframe", r#"{"Head1":1}"#).replace(
                "\"Payload\"",
                "\"Status\":{\"Code\":1073741824},\"Payload\"",
            ),
            Reason::BadQuality,
            "uncertain",
        ),
    ] {
        let got = read(&payload);
        let hit = matches!(got.as_slice(), [Err((r, w))] if *r == reason && w.contains(words));
        assert!(hit, "{payload}: {got:?}");
    }
}
