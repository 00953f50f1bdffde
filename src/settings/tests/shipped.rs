//! The configurations that are shipped: they are good, and the sample shows every key there is.

use crate::settings::keys::{KEYS, LATER};
use crate::settings::{Encryption, Means, Settings};

use super::{faults_of, settings};

const SAMPLE: &str = include_str!("../../../config/evenrow.toml");

#[test]
fn every_shipped_configuration_is_good() {
    let folder = concat!(env!("CARGO_MANIFEST_DIR"), "/config");
    let mut seen = 0;
    for entry in std::fs::read_dir(folder).expect("the folder is there") {
        let path = entry.expect("readable").path();
        let text = std::fs::read_to_string(&path).expect("text");
        assert_eq!(faults_of(&text, &[]), [], "{}", path.display());
        seen += 1;
    }
    assert!(seen >= 2, "only {seen} configurations in {folder}");
}

/// The sample with the keys that it shows and does not use put in force.
fn everything_in_force() -> String {
    let uncommented = |line: &str| match line.strip_prefix('#') {
        Some(key) if key.starts_with(|c: char| c.is_ascii_lowercase()) => key.to_owned(),
        _ => line.to_owned(),
    };
    let lines: Vec<String> = SAMPLE.lines().map(uncommented).collect();
    lines.join("\n").replace("\"mqtt://", "\"mqtts://")
}

#[test]
fn the_sample_stays_good_with_every_key_in_force() {
    let text = everything_in_force();
    assert_eq!(faults_of(&text, &[]), []);
    let settings: Settings = settings(&text).expect("good");
    assert_eq!(settings.pages(), "https://evenrow.quayside.example");
    assert!(settings.broker.client_key_file.is_some());
}

#[test]
fn the_sample_shows_every_key() {
    let text = everything_in_force();
    let table: toml::Table = text.parse().expect("TOML");
    let bank = |path: &str| path.strip_prefix("bank").map(str::to_owned);
    for key in KEYS {
        let pointed: Vec<&toml::Value> = match (key.section, bank(key.section)) {
            ("", _) => table.get(key.name).into_iter().collect(),
            ("plant.shift", _) => inside(table.get("plant"), "shift", key.name),
            ("outlet", _) => items(table.get("outlet"), key.name),
            (_, Some(inner)) => inside_banks(&table, inner.trim_start_matches('.'), key.name),
            (section, None) => table
                .get(section)
                .and_then(|s| s.get(key.name))
                .into_iter()
                .collect(),
        };
        assert!(
            !pointed.is_empty(),
            "{}.{} is not in the sample",
            key.section,
            key.name
        );
    }
}

fn inside<'t>(table: Option<&'t toml::Value>, list: &str, name: &str) -> Vec<&'t toml::Value> {
    items(table.and_then(|t| t.get(list)), name)
}

fn items<'t>(list: Option<&'t toml::Value>, name: &str) -> Vec<&'t toml::Value> {
    list.and_then(toml::Value::as_array)
        .into_iter()
        .flatten()
        .filter_map(|item| item.get(name))
        .collect()
}

fn inside_banks<'t>(table: &'t toml::Table, inner: &str, name: &str) -> Vec<&'t toml::Value> {
    let banks = table.get("bank").and_then(toml::Value::as_array);
    let banks = banks.into_iter().flatten();
    let at = |bank: &'t toml::Value| match inner {
        "" => bank.get(name),
        inner => {
            let table = inner.split('.').try_fold(bank, |table, key| table.get(key));
            table.and_then(|table| table.get(name))
        }
    };
    banks.filter_map(at).collect()
}

/// Examples are shown in hints, so each must be TOML.
#[test]
fn every_example_is_toml_and_says_what_the_key_is() {
    for key in KEYS {
        let line = if key.is_heading() {
            key.example.to_owned()
        } else {
            format!("{} = {}", key.name, key.example)
        };
        assert!(line.parse::<toml::Table>().is_ok(), "{line}");
        assert!(!key.about.is_empty() && !key.about.ends_with('.'), "{line}");
    }
}

#[test]
fn keys_of_a_later_version_are_refused_and_not_suggested() {
    for (section, name, until) in LATER {
        assert!(
            !KEYS
                .iter()
                .any(|key| key.section == *section && key.name == *name),
            "{name}"
        );
        assert!(!until.is_empty());
    }
}

/// The sample of the design, whose keys are promised.
#[test]
fn promised_values_are_read_as_promised() {
    let settings = settings(SAMPLE).expect("good");
    let bank = &settings.banks[0];
    assert_eq!(bank.name.as_ref(), "filler-2");
    assert_eq!(bank.characteristic.lower, Some(485.0));
    assert_eq!(bank.characteristic.upper, Some(515.0));
    assert_eq!(bank.budget.to_string(), "1 per 90 days");
    assert_eq!(bank.silent_after_us, Some(600_000_000));
    assert_eq!(bank.layout, crate::model::Layout::Ring);
    assert_eq!(settings.feeds[0].topic.source_level, Some(3));
    assert_eq!(settings.plant.shifts.len(), 3);
    let night = &settings.outlets[1];
    assert_eq!(night.route.shifts, settings.plant.shifts[2..]);
    assert_eq!(night.route.escalate_after_us, 600_000_000);
    assert_eq!(night.route.updates, crate::notice::Updates::States);
    let Means::Mail(mail) = &night.means else {
        panic!("{night:?}");
    };
    assert_eq!((mail.port, mail.encryption), (587, Encryption::StartTls));
    assert_eq!(mail.to[0].name.as_deref(), Some("Night shift"));
    assert_eq!(mail.to[0].address, "night@quayside.example");
    let weigher = &settings.banks[1];
    assert_eq!(
        weigher.sources,
        crate::model::Sources::Discover { most: 24 }
    );
    let slot = crate::model::Pairing::Slot {
        length_us: 10_000_000,
    };
    assert_eq!(weigher.pairing, slot);
    let refused = &settings.feeds[0].belief;
    assert_eq!(refused.sentinels.len(), 2);
    assert_eq!(
        refused.upper.map(|v| v.to_string()).as_deref(),
        Some("1000.0")
    );
}
