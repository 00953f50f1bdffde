//! Recordings in every form, and what becomes of bad rows.

use std::io::Write;

use super::*;
use crate::model::Value;

fn how(banks: &[&str]) -> How {
    How {
        banks: banks.iter().map(|&name| name.into()).collect(),
        bank: None,
        columns: RecordingColumns::default(),
        beliefs: Vec::new(),
        told_by: Vec::new(),
    }
}

fn file(bytes: &[u8]) -> tempfile::NamedTempFile {
    let mut file = tempfile::NamedTempFile::new().unwrap();
    file.write_all(bytes).unwrap();
    file
}

/// Every item as one line of text.
fn told(bytes: &[u8], how: &How) -> Vec<String> {
    let file = file(bytes);
    let rows = open(&Source::named(file.path()), how).expect("opens");
    rows.map(|row| match row {
        Ok(Recorded {
            line,
            measurement: m,
            received,
            turn,
        }) => {
            let taken = m.taken.map_or("-".to_owned(), |t| t.to_string());
            let more = [
                m.cycle.map(|c| format!(" n{c}")),
                received.map(|r| format!(" r{}", r.us())),
                turn.map(|t| format!(" t{t}")),
            ];
            let more: String = more.into_iter().flatten().collect();
            format!(
                "{line}: {} {} {} {taken}{more}",
                m.bank.0, m.source, m.value
            )
        }
        Err(Fault::Refused { line, refusal }) => {
            assert!(
                refusal.topic.ends_with(&format!(" line {line}")),
                "{}",
                refusal.topic
            );
            format!("{line}: {} {}", refusal.reason.word(), refusal.detail)
        }
        Err(Fault::Broken(error)) => format!("broken after {}: {}", error.line, error.why),
    })
    .collect()
}

fn not_opened(bytes: &[u8], how: &How, words: &str) {
    let file = file(bytes);
    match open(&Source::named(file.path()), how) {
        Ok(_) => panic!("opened {:?}", String::from_utf8_lossy(bytes)),
        Err(error) => assert!(error.to_string().contains(words), "{error}"),
    }
}

const T0: &str = "1970-01-01T00:00:00Z";
const T1: &str = "1970-01-01T00:00:01Z";

#[test]
fn long_tables() {
    let table = "\u{feff}source,time,value,cycle,received,turn\r\n01,0,503.10,1,5,9\r\n02,1970-01-01T00:00:01Z,-0.5,,,\r\n\"a,b\",1,7,2.0,,\r\n";
    let expected = [
        format!("2: 0 01 503.10 {T0} n1 r5000000 t9"),
        format!("3: 0 02 -0.5 {T1}"),
        format!("4: 0 a,b 7 {T1} n2"),
    ];
    assert_eq!(told(table.as_bytes(), &how(&["one"])), expected);
}

#[test]
fn wide_tables_leave_empty_cells_out() {
    let table = "time;cycle;h 1;h 2;h 3\n0;1;5.1;;5.3\n1;2;;;\n1;3;5.2;x;5,2\n";
    let expected = [
        format!("2: 0 h 1 5.1 {T0} n1"),
        format!("2: 0 h 3 5.3 {T0} n1"),
        format!("4: 0 h 1 5.2 {T1} n3"),
        "4: not_a_number 'x' is no number".to_owned(),
        "4: not_a_number '5,2' is no number; write a decimal point, not a comma".to_owned(),
    ];
    assert_eq!(told(table.as_bytes(), &how(&["one"])), expected);
}

#[test]
fn columns_may_have_other_names() {
    let columns = RecordingColumns {
        time: "stamp".into(),
        source: "head/no".into(),
        value: "net~g".into(),
        ..RecordingColumns::default()
    };
    let how = How {
        columns,
        ..how(&["one"])
    };
    let expected = [format!("2: 0 7 503.1 {T0}")];
    assert_eq!(
        told(b"stamp\thead/no\tnet~g\n0\t7\t503.1\n", &how),
        expected
    );
    let line = br#"{"stamp":0,"head/no":7,"net~g":503.1}"#;
    assert_eq!(told(line, &how), [format!("1: 0 7 503.1 {T0}")]);
}

#[test]
fn blank_lines_count_but_say_nothing() {
    let table = "\r\n\n time,source,value\r\n\r\n0,01,1\r\n\n0,\"a\nb\",2\n\n0,01,3";
    let expected = [
        format!("5: 0 01 1 {T0}"),
        "7: unknown_source the name of the source contains control characters".to_owned(),
        format!("10: 0 01 3 {T0}"),
    ];
    assert_eq!(told(table.as_bytes(), &how(&["one"])), expected);
    let lines = b"\n\n{\"time\":0,\"source\":1,\"value\":1}\n";
    assert_eq!(told(lines, &how(&["one"])), [format!("3: 0 1 1 {T0}")]);
}

#[test]
fn json_lines() {
    let lines =
        br#"{"time":"1970-01-01T01:00:00+01:00","source":"01","value":0.10,"cycle":4,"bank":"two"}

{"time":1000,"source":2,"value":1e2,"received":0,"turn":3,"bank":"one"}
{"time":0,"source":"01","value":"5","bank":"one"}
{"time":0,"value":5,"bank":"one"}
{"time":"1970-01-01T00:00:00","source":"01","value":5,"bank":"one"}
{"source":"01","value":5,"bank":"one"}
{"time":0,"source":"01","value":5,"bank":"three"}
{"time":0,"source":"01","value":5}
not json
"#;
    let got = told(lines, &how(&["one", "two"]));
    let expected = [
        format!("1: 1 01 0.10 {T0} n4"),
        "3: 0 2 1e2 1970-01-01T00:16:40Z r0 t3".to_owned(),
        "4: not_a_number the value '5' is a number written as text, send it without quotation marks".to_owned(),
        "5: field_missing there is no \"source\"".to_owned(),
        "6: bad_time the time '1970-01-01T00:00:00' has no offset from UTC, write for example 2026-03-01T06:00:00Z or 2026-03-01T07:00:00+01:00".to_owned(),
        "7: field_missing there is no \"time\"".to_owned(),
        "8: no_bank there is no bank 'three' in the configuration".to_owned(),
        "9: no_bank the line names no bank and there are several".to_owned(),
    ];
    assert_eq!(got[..8], expected);
    assert!(
        got[8].starts_with("10: malformed the payload is not valid JSON"),
        "{}",
        got[8]
    );
}

#[test]
fn bad_rows_are_refused_and_the_reading_goes_on() {
    let table = b"time,source,value\n0,01,1\n0,01\n0,\xff,2\n,01,3\n0,,4\n0,01,\n0,01,9\n";
    let expected = [
        format!("2: 0 01 1 {T0}"),
        "3: malformed the row has 2 cells, the header has 3".to_owned(),
        "4: malformed the row is not UTF-8 text".to_owned(),
        "5: bad_time there is no time".to_owned(),
        "6: field_missing the name of the source is empty".to_owned(),
        "7: empty only blanks where a number should be".to_owned(),
        format!("8: 0 01 9 {T0}"),
    ];
    assert_eq!(told(table, &how(&["one"])), expected);
}

fn gzip(bytes: &[u8]) -> Vec<u8> {
    let mut packed = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::fast());
    packed.write_all(bytes).unwrap();
    packed.finish().unwrap()
}

#[test]
fn gzip_is_unpacked_and_a_cut_file_is_told() {
    let mut table = "time,source,value\n".to_owned();
    for n in 0..5000 {
        table.push_str(&format!("{n},01,{}\n", n * 7919 % 1013));
    }
    let packed = gzip(table.as_bytes());
    let whole = told(&packed, &how(&["one"]));
    assert_eq!(whole.len(), 5000);
    // Two files joined are one recording (RFC 1952 §2.2).
    let (a, b) = table.split_at(table.len() / 2);
    assert_eq!(
        told(
            &[gzip(a.as_bytes()), gzip(b.as_bytes())].concat(),
            &how(&["one"])
        ),
        whole
    );
    let cut = told(&packed[..packed.len() / 2], &how(&["one"]));
    assert!(cut.len() > 100 && cut.len() < 4000, "{}", cut.len());
    assert!(
        cut.last().unwrap().starts_with("broken after"),
        "{:?}",
        cut.last()
    );
    assert!(
        cut[..cut.len() - 1]
            .iter()
            .all(|line| line.contains(": 0 01 "))
    );
}

#[test]
fn a_line_without_end_is_told() {
    let mut table = b"time,source,value\n0,01,1\n".to_vec();
    table.resize(table.len() + 2 * MOST_LINE_BYTES as usize, b'x');
    let got = told(&table, &how(&["one"]));
    assert_eq!(got.len(), 2);
    assert!(got[1].contains("longer than"), "{}", got[1]);
    let mut lines = b"{\"time\":0,\"source\":1,\"value\":1}\n{\"".to_vec();
    lines.resize(lines.len() + 2 * MOST_LINE_BYTES as usize, b'x');
    let got = told(&lines, &how(&["one"]));
    assert_eq!(got.len(), 2);
    assert!(got[1].contains("longer than"), "{}", got[1]);
}

#[test]
fn what_cannot_be_opened_says_why() {
    let one = how(&["one"]);
    not_opened(b"", &one, "is empty");
    not_opened(b"\n \n", &one, "is empty");
    not_opened(
        b"when,source,value\n",
        &one,
        "no column 'time'; the columns are: when, source, value",
    );
    not_opened(b"time,source\n", &one, "no column 'value'");
    not_opened(b"time,value\n", &one, "no column 'source'");
    not_opened(b"time,cycle\n", &one, "one column per source");
    not_opened(b"time,a,a\n", &one, "'a' stands twice");
    not_opened(
        b"time,source,value\n",
        &how(&["one", "two"]),
        "several banks; say which one is meant (one, two)",
    );
    let missing = open(&Source::named("/nowhere/at/all.csv"), &one)
        .err()
        .map(|e| e.to_string());
    assert!(missing.is_some_and(|words| words.starts_with("/nowhere/at/all.csv: ")));
    assert_eq!(Source::named("-"), Source::Stdin);
}

#[test]
fn the_bank_may_be_said() {
    let how = How {
        bank: Some(BankIx(1)),
        ..how(&["one", "two"])
    };
    assert_eq!(
        told(b"time,source,value\n0,01,1\n", &how),
        [format!("2: 1 01 1 {T0}")]
    );
    assert_eq!(
        told(b"time,source,value,bank\n0,01,1,one\n0,01,2,\n", &how),
        [format!("2: 0 01 1 {T0}"), format!("3: 1 01 2 {T0}")]
    );
}

#[test]
fn where_the_time_tells_the_source_none_need_be_recorded() {
    let shifts = How {
        told_by: vec![ToldBy::Time, ToldBy::Message],
        ..how(&["one", "two"])
    };
    let both = b"time,value,bank\n0,1,one\n0,2,two\n";
    let nameless = "field_missing the name of the source is empty";
    let wanted = [format!("2: 0 all shifts 1 {T0}"), format!("3: {nameless}")];
    assert_eq!(told(both, &shifts), wanted);
    let lines =
        b"{\"time\":0,\"value\":1,\"bank\":\"one\"}\n{\"time\":0,\"value\":2,\"bank\":\"two\"}\n";
    let wanted = [format!("1: 0 all shifts 1 {T0}"), format!("2: {nameless}")];
    assert_eq!(told(lines, &shifts), wanted);
    // A source that is recorded is another question's.
    let named = b"time,source,value,bank\n0,07,1,one\n";
    assert_eq!(told(named, &shifts), [format!("2: 0 all shifts 1 {T0}")]);
    not_opened(b"time,value\n0,1\n", &how(&["one"]), "no column 'source'");
}

#[test]
fn what_is_not_believed_live_is_not_believed_recorded() {
    let how = How {
        beliefs: vec![Belief {
            sentinels: vec![Value::parse("-127").unwrap()],
            ..Belief::default()
        }],
        ..how(&["one"])
    };
    let words = "sentinel source '2': -127.0 is one of `sentinels`, by which the instrument says that it has no value";
    assert_eq!(
        told(b"time,1,2\n0,1,-127.0\n", &how),
        [format!("2: 0 1 1 {T0}"), format!("2: {words}")]
    );
}

proptest::proptest! {
    #[test]
    fn no_file_panics(bytes in proptest::collection::vec(proptest::prelude::any::<u8>(), 0..300), head in 0..4) {
        let start: &[u8] = [&b"time,source,value\n"[..], b"time,1,2\n", b"{\"time\":", b""][head as usize];
        let file = file(&[start, &bytes].concat());
        if let Ok(rows) = open(&Source::named(file.path()), &how(&["one"])) {
            proptest::prop_assert!(rows.count() <= 2 * (bytes.len() + 1));
        }
    }
}
