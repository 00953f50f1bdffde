//! Configurations and the faults they must give, as data.

mod cases;
mod outlets;
mod payloads;
mod shifts;
mod shipped;

use super::{Fault, Faults, Place, Settings};

/// A configuration without a fault, with its lines numbered.
const GOOD: &str = r#"[plant]
name = "Quayside"
time_zone = "Europe/Lisbon"
[[plant.shift]]
name = "early"
from = "06:00"
to = "14:00"
[broker]
url = "mqtt://127.0.0.1:1883"
[store]
folder = "/var/lib/evenrow"
[web]
token_file = "/etc/evenrow/tokens"
[[bank]]
name = "filler-2"
unit = "g"
resolution = 0.1
topic = "quayside/filler2/head/{source}/net"
payload = { form = "json", value = "/v", cycle = "/n" }
sources = ["01", "02", "03", "04"]
pairing = "cycle"
spans = [10, 40]
margin = 0.8
false_calls = "1 per 90 days"
"#;

/// The good configuration with one part changed. The part must be there.
pub(super) fn good_with(from: &str, to: &str) -> String {
    assert!(
        GOOD.contains(from),
        "{from} is not in the good configuration"
    );
    GOOD.replacen(from, to, 1)
}

/// Read without variables.
pub(super) fn settings(text: &str) -> Result<Settings, Faults> {
    Settings::parse(text, "test.toml", [])
}

fn faults_of(text: &str, variables: &[(&str, &str)]) -> Vec<Fault> {
    let own = |(name, value): &(&str, &str)| ((*name).to_owned(), (*value).to_owned());
    match Settings::parse(text, "test.toml", variables.iter().map(own)) {
        Ok(_) => Vec::new(),
        Err(faults) => faults.list().to_vec(),
    }
}

/// Checks that `text` gives exactly one fault, in this line (0 for the file as a whole), whose message
/// and hint hold these words.
fn check(text: &str, line: usize, words: &str) {
    let faults = faults_of(text, &[]);
    let [fault] = faults.as_slice() else {
        panic!("one fault expected for {words:?}, not {faults:#?} in\n{text}");
    };
    assert_eq!(fault.place.line().unwrap_or_default(), line, "{fault:#?}");
    assert_words(fault, words);
}

/// Checks that each of the words parted by `|` is in the message or the hint.
fn assert_words(fault: &Fault, words: &str) {
    let all = format!("{} {}", fault.message, fault.hint);
    for word in words.split('|') {
        assert!(all.contains(word), "{word:?} is not in {fault:#?}");
    }
    assert!(!fault.hint.is_empty(), "no hint: {fault:#?}");
}

#[test]
fn the_good_configuration_is_good() {
    assert_eq!(faults_of(GOOD, &[]), []);
}

#[test]
fn all_faults_come_at_once_in_the_order_of_the_file() {
    let text = GOOD
        .replace("Europe/Lisbon", "Europe/Lisbn")
        .replace("[store]\n", "[store]\nkeep_dais = 1\n")
        .replace("margin = 0.8", "margin = \"0.8\"")
        .replace("[10, 40]", "[1, 40]")
        .replace("unit = \"g\"\n", "");
    let lines: Vec<_> = faults_of(&text, &[])
        .iter()
        .map(|f| f.place.line())
        .collect();
    assert_eq!(lines, [Some(3), Some(11), Some(15), Some(22), Some(23)]);
}

#[test]
fn variables_go_before_the_file_and_are_named_in_faults() {
    let variable = |name: &str| Place::Variable(name.to_owned());
    for (name, value, words) in [
        ("EVENROW__BROKER__URL", "127.0.0.1", "how to speak"),
        ("EVENROW__STORE__KEEP_DAYS", "many", "whole number"),
        ("EVENROW__STORE__KEEP_DAYS", "-1", "between 0"),
        ("EVENROW__WEB__TLS_IN_FRONT", "maybe", "true or false"),
        ("EVENROW__BROKER__ULR", "x", "did you mean `url`"),
        ("EVENROW__NOTHING", "x", "no key `nothing`"),
        ("EVENROW__BROKER", "x", "must be a table"),
        ("EVENROW__BROKER__URL__HOST", "x", "no keys of its own"),
        ("EVENROW__BANK__MARGIN", "1", "is a list"),
        ("EVENROW__PLANT__SHIFT__FROM", "06:00", "is a list"),
        ("EVENROW__BROKER____URL", "x", "leads to no key"),
        ("EVENROW__", "x", "leads to no key"),
        ("EVENROW__BROKER__USER", "a\u{fffd}b", "UTF-8"),
        ("evenrow__plant__name", " ", "`name` is empty"),
    ] {
        let faults = faults_of(GOOD, &[(name, value)]);
        assert_eq!(faults.len(), 1, "{name}: {faults:#?}");
        assert_eq!(faults[0].place, variable(name));
        assert_words(&faults[0], words);
    }
    let twice = faults_of(
        GOOD,
        &[
            ("EVENROW__STORE__FOLDER", "a"),
            ("evenrow__store__folder", "b"),
        ],
    );
    assert_eq!(twice.len(), 1);
    assert_words(&twice[0], "sets the same key");
}

#[test]
fn a_section_made_by_variables_is_not_blamed_for_what_it_lacks() {
    let text = good_with("[store]\nfolder = \"/var/lib/evenrow\"\n", "");
    let faults = faults_of(&text, &[("EVENROW__STORE__KEEP_DAYS", "7")]);
    assert_eq!(faults.len(), 1, "{faults:#?}");
    assert_eq!(faults[0].place, Place::File);
    assert_words(&faults[0], "`folder` is missing in [store]");
}

#[test]
fn a_faulty_payload_hides_no_other_fault() {
    let text = GOOD.replace("/{source}/", "/").replace(
        "{ form = \"json\", value = \"/v\", cycle = \"/n\" }",
        "{ form = \"json\", value = \"v\" }",
    );
    let lines: Vec<_> = faults_of(&text, &[])
        .iter()
        .map(|f| f.place.line())
        .collect();
    assert_eq!(lines, [Some(18), Some(19), Some(21)]);
}

#[test]
fn variables_take_the_type_their_key_wants() {
    let variables = [
        ("EVENROW__BROKER__URL", "mqtts://broker.quayside.example"),
        ("EVENROW__BROKER__USER", "1234"),
        ("EVENROW__STORE__KEEP_DAYS", "7"),
        ("EVENROW__WEB__LISTEN", "0.0.0.0:80"),
        ("EVENROW__WEB__TLS_IN_FRONT", "true"),
        ("EVENROW_LOG", "not ours"),
        ("PATH", "/bin"),
    ];
    let own = variables.map(|(name, value)| (name.to_owned(), value.to_owned()));
    let settings = Settings::parse(GOOD, "test.toml", own).expect("good");
    assert!(settings.broker.tls);
    assert_eq!(settings.broker.port, 8883);
    assert_eq!(settings.broker.user.as_deref(), Some("1234"));
    assert_eq!(settings.store.keep_days, 7);
    assert!(settings.web.tls_in_front);
    assert_eq!(settings.pages(), "http://0.0.0.0:80");
}

#[test]
fn what_is_required_may_come_from_a_variable() {
    let text = good_with("[broker]\nurl = \"mqtt://127.0.0.1:1883\"\n", "");
    check(&text, 0, "`url` is missing in [broker]|url = \"mqtt://");
    assert_eq!(
        faults_of(&text, &[("EVENROW__BROKER__URL", "mqtt://b")]),
        []
    );
}

#[test]
fn defaults_are_those_of_the_manual() {
    let text = good_with("spans = [10, 40]\n", "");
    let settings = settings(&text).expect("good");
    let bank = &settings.banks[0];
    assert_eq!(bank.spans, [10, 40, 160, 640]);
    assert_eq!(bank.look_every_us, 30_000_000);
    assert_eq!(bank.spread_margin, 1.5);
    assert_eq!(bank.wait_cycles, 3);
    assert_eq!(bank.silent_after_us, None);
    assert_eq!(bank.oldest_us, 30 * crate::model::US_PER_DAY);
    assert_eq!(settings.store.keep_days, 90);
    assert_eq!(settings.web.listen.to_string(), "127.0.0.1:7310");
    assert_eq!(settings.broker.client_id, "evenrow-Quayside");
    assert_eq!(settings.broker.session_expiry_s, 7 * 86_400);
}

#[test]
fn targets_keep_their_digits() {
    let text = good_with("unit", "target = 503.10\ndeclared = 500\nunit");
    let settings = settings(&text).expect("good");
    let characteristic = &settings.banks[0].characteristic;
    let written = |value: Option<crate::model::Value>| value.map(|v| v.to_string());
    assert_eq!(written(characteristic.target).as_deref(), Some("503.10"));
    assert_eq!(written(characteristic.declared).as_deref(), Some("500"));
}

#[test]
fn a_file_that_cannot_be_read_is_a_fault_too() {
    let folder = tempfile::tempdir().expect("a folder");
    let missing = super::load(&folder.path().join("none.toml"), []).expect_err("missing");
    assert_words(&missing.list()[0], "cannot be read|check the path");
    assert_eq!(missing.list()[0].place, Place::File);
    let latin = folder.path().join("latin.toml");
    std::fs::write(&latin, b"[plant]\nname = \"K\xfcste\"\n").expect("written");
    let faults = super::load(&latin, []).expect_err("no UTF-8");
    assert_words(&faults.list()[0], "line 2 is not UTF-8|UTF-8");
    let is_folder = super::load(folder.path(), []).expect_err("a folder");
    assert_words(&is_folder.list()[0], "cannot be read");
}

#[test]
fn reports_show_the_line_the_place_and_the_hint() {
    let text = good_with("margin = 0.8", "margin = \"0.8\"");
    let own = [("EVENROW__STORE__KEEP_DAYS".to_owned(), "x".to_owned())];
    let faults = Settings::parse(&text, "test.toml", own).expect_err("faulty");
    let plain = faults.report(super::Ink::Plain);
    for part in [
        "test.toml: 2 faults",
        "test.toml:23:10",
        "margin = \"0.8\"",
        "`margin` is text and must be a number",
        "EVENROW__STORE__KEEP_DAYS: `keep_days` is no number",
        "help: for example `margin = 0.8`",
    ] {
        assert!(plain.contains(part), "{part:?} is not in\n{plain}");
    }
    assert!(!plain.contains('\u{1b}'), "colour in\n{plain}");
    assert!(faults.report(super::Ink::Colour).contains('\u{1b}'));
    let log = faults.to_string();
    assert!(log.contains("test.toml:23:10: `margin` is text"), "{log}");
}

#[test]
fn a_file_of_rubbish_is_reported_in_short() {
    let rubbish: String = (0..500).map(|i| format!("key{i} = 1\n")).collect();
    let faults = settings(&rubbish).expect_err("rubbish");
    assert!(faults.list().len() > 500);
    let report = faults.report(super::Ink::Plain);
    assert!(report.contains(&format!("… and {} more", faults.list().len() - 50)));
}

proptest::proptest! {
    #[test]
    fn arbitrary_text_never_panics(text in "\\PC*|(\\PC|\n)*|[\\[\\]{}=\",.#a-z0-9 \n]*") {
        if let Err(faults) = settings(&text) {
            faults.report(super::Ink::Plain);
        }
    }

    #[test]
    fn mutated_samples_never_panic(cut in 0_usize..6000, length in 0_usize..40, put in "\\PC{0,6}|\n|\\[|=|\"") {
        let sample = include_str!("../../config/evenrow.toml");
        let (start, end) = (floor(sample, cut), floor(sample, cut + length));
        let text = format!("{}{put}{}", &sample[..start], &sample[end..]);
        if let Err(faults) = settings(&text) {
            for ink in [super::Ink::Plain, super::Ink::Colour] {
                faults.report(ink);
            }
            proptest::prop_assert!(!faults.list().is_empty());
        }
    }
}

/// The nearest boundary between characters at or before `at`.
fn floor(text: &str, at: usize) -> usize {
    (0..=at.min(text.len()))
        .rev()
        .find(|i| text.is_char_boundary(*i))
        .unwrap_or(0)
}
