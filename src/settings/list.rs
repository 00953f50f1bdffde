//! The settings as used as a list of keys, each with where its value came from: what the page and the
//! interface show.
//!
//! What must hold: every key of the configuration is there (full destructuring), and no secret is:
//! secrets stand in files, and only the files' names are settings.

use std::collections::BTreeMap;
use std::path::PathBuf;

use crate::model::{Bank, Characteristic, Layout, Pairing, Sources, US_PER_DAY, Value};

use super::check::words;
use super::fault::Place;
use super::raw::{Kind, Node, Table};
use super::used::{
    Broker, Feed, JsonPointers, PayloadForm, PlantSettings, Protocol, RecordingColumns, Settings,
    StoreSettings, TimeForm, TopicTemplate, WebSettings,
};

/// Where the value of a key came from.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Origin {
    /// The file, at this line.
    File {
        /// The line, from 1.
        line: usize,
    },
    /// This environment variable.
    Variable(String),
    /// It was not given: the value that holds then.
    Default,
}

/// Where the keys that were given stand, by their path (`web.listen`, `bank.filler-2.margin`).
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Origins(BTreeMap<String, Origin>);

/// One key.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Setting {
    /// The section: `web`, or `bank` with its name.
    pub section: String,
    /// The key, with a point before keys of a table inside.
    pub key: &'static str,
    /// The value as used; empty where there is none.
    pub value: String,
    /// Where it came from.
    pub origin: Origin,
}

impl Origins {
    /// Of the tree that the file and the variables gave.
    pub(super) fn of(root: &Node) -> Self {
        let mut found = BTreeMap::new();
        if let Kind::Table(table) = &root.kind {
            walk(table, "", &mut found);
        }
        Self(found)
    }

    /// Of the key at this path, or of the table that stands for it.
    fn find(&self, section: &str, key: &str) -> Origin {
        let path = format!("{section}.{key}");
        let short = key.split('.').next().unwrap_or(key);
        let found = self.0.get(&path);
        let found = found.or_else(|| self.0.get(&format!("{section}.{short}")));
        found.cloned().unwrap_or(Origin::Default)
    }
}

fn walk(table: &Table, before: &str, found: &mut BTreeMap<String, Origin>) {
    for (name, entry) in table {
        let path = if before.is_empty() {
            name.clone()
        } else {
            format!("{before}.{name}")
        };
        match &entry.node.kind {
            Kind::Table(inner) => walk(inner, &path, found),
            Kind::List(items) if items.iter().any(|i| matches!(i.kind, Kind::Table(_))) => {
                for item in items {
                    if let Kind::Table(inner) = &item.kind {
                        walk(inner, &format!("{path}.{}", name_of(inner)), found);
                    }
                }
            }
            _ => {
                let origin = match &entry.key {
                    Place::Variable(name) => Origin::Variable(name.clone()),
                    place => Origin::File {
                        line: place.line().unwrap_or(0),
                    },
                };
                found.insert(path, origin);
            }
        }
    }
}

fn name_of(table: &Table) -> &str {
    match table.get("name").map(|entry| &entry.node.kind) {
        Some(Kind::Text(name)) => name,
        _ => "",
    }
}

/// Keys of a section with their values.
type Keys = Vec<(&'static str, String)>;

impl Settings {
    /// Every key with its value and where that came from.
    pub fn list(&self) -> Vec<Setting> {
        let Self {
            plant,
            broker,
            store,
            web,
            banks,
            feeds,
            origins,
        } = self;
        let mut sections = vec![
            ("plant".to_owned(), plant_keys(plant)),
            ("broker".to_owned(), broker_keys(broker)),
            ("store".to_owned(), store_keys(store)),
            ("web".to_owned(), web_keys(web)),
        ];
        for (bank, feed) in banks.iter().zip(feeds) {
            let keys = [bank_keys(bank), feed_keys(feed)].concat();
            sections.push((format!("bank.{}", bank.name), keys));
        }
        let mut all = Vec::new();
        for (section, keys) in sections {
            all.extend(keys.into_iter().map(|(key, value)| Setting {
                origin: origins.find(&section, key),
                section: section.clone(),
                key,
                value,
            }));
        }
        all
    }
}

fn path(file: Option<&PathBuf>) -> String {
    file.map_or_else(String::new, |f| f.display().to_string())
}

fn plant_keys(PlantSettings { name, zone, shifts }: &PlantSettings) -> Keys {
    let shift = |s: &super::Shift| format!("{} {:.0} to {:.0}", s.name, s.from, s.to);
    let shifts: Vec<String> = shifts.iter().map(shift).collect();
    vec![
        ("name", name.to_string()),
        ("time_zone", zone.iana_name().unwrap_or_default().to_owned()),
        ("shift", shifts.join(", ")),
    ]
}

fn broker_keys(broker: &Broker) -> Keys {
    let Broker {
        host,
        port,
        tls,
        client_id,
        protocol,
        user,
        password_file,
        ca_file,
        client_certificate_file,
        client_key_file,
        session_expiry_s,
        receive_maximum,
        most_bytes,
        keep_alive_s,
    } = broker;
    let scheme = if *tls { "mqtts" } else { "mqtt" };
    let version = match protocol {
        Protocol::V5 => "5",
        Protocol::V4 => "4",
    };
    let seconds = |s: i64| words(s * crate::model::US_PER_S);
    vec![
        ("url", format!("{scheme}://{host}:{port}")),
        ("client_id", client_id.clone()),
        ("protocol", version.to_owned()),
        ("user", user.clone().unwrap_or_default()),
        ("password_file", path(password_file.as_ref())),
        ("ca_file", path(ca_file.as_ref())),
        (
            "client_certificate_file",
            path(client_certificate_file.as_ref()),
        ),
        ("client_key_file", path(client_key_file.as_ref())),
        ("session_expiry", seconds(i64::from(*session_expiry_s))),
        ("receive_maximum", receive_maximum.to_string()),
        ("most_bytes", most_bytes.to_string()),
        ("keep_alive", seconds(i64::from(*keep_alive_s))),
    ]
}

fn store_keys(StoreSettings { folder, keep_days }: &StoreSettings) -> Keys {
    vec![
        ("folder", folder.display().to_string()),
        ("keep_days", keep_days.to_string()),
    ]
}

fn web_keys(web: &WebSettings) -> Keys {
    let WebSettings {
        listen,
        token_file,
        tls_in_front,
        certificate_file,
        key_file,
        address,
    } = web;
    vec![
        ("listen", listen.to_string()),
        ("token_file", path(token_file.as_ref())),
        ("certificate_file", path(certificate_file.as_ref())),
        ("key_file", path(key_file.as_ref())),
        ("tls_in_front", tls_in_front.to_string()),
        ("address", address.clone().unwrap_or_default()),
    ]
}

fn bank_keys(bank: &Bank) -> Keys {
    let Bank {
        name,
        equipment,
        characteristic,
        sources,
        pairing,
        spans,
        look_every_us,
        margin,
        spread_margin,
        budget,
        wait_cycles,
        silent_after_us,
        oldest_us,
        layout,
    } = bank;
    let pairing = match pairing {
        Pairing::Cycle => "cycle".to_owned(),
        Pairing::Slot { length_us } => format!("slot of {}", words(*length_us)),
        Pairing::None => "none".to_owned(),
    };
    let sources = match sources {
        Sources::Listed(names) => names.join(", "),
        Sources::Discover { most } => format!("discover, at most {most}"),
    };
    let spans: Vec<String> = spans.iter().map(ToString::to_string).collect();
    let mut keys = vec![
        ("name", name.to_string()),
        (
            "equipment",
            equipment
                .as_ref()
                .map_or_else(String::new, |e| e.to_string()),
        ),
    ];
    keys.extend(characteristic_keys(characteristic));
    keys.extend([
        ("sources", sources),
        ("pairing", pairing),
        ("spans", spans.join(", ")),
        ("look_every", words(*look_every_us)),
        ("margin", margin.to_string()),
        ("spread_margin", spread_margin.to_string()),
        ("false_calls", budget.to_string()),
        ("wait_cycles", wait_cycles.to_string()),
        (
            "silent_after",
            silent_after_us.map_or_else(|| "20 usual intervals, at least 2 min".to_owned(), words),
        ),
        ("oldest_days", (oldest_us / US_PER_DAY).to_string()),
        (
            "layout",
            match layout {
                Layout::Row => "row",
                Layout::Ring => "ring",
            }
            .to_owned(),
        ),
    ]);
    keys
}

fn characteristic_keys(what: &Characteristic) -> Keys {
    let Characteristic {
        name,
        unit,
        resolution,
        target,
        declared,
        lower,
        upper,
    } = what;
    let number = |x: Option<f64>| x.map_or_else(String::new, |x| x.to_string());
    let value = |x: Option<Value>| x.map_or_else(String::new, |x| x.to_string());
    vec![
        ("characteristic", name.to_string()),
        ("unit", unit.to_string()),
        ("resolution", number(*resolution)),
        ("target", value(*target)),
        ("declared", value(*declared)),
        ("limits.lower", number(*lower)),
        ("limits.upper", number(*upper)),
    ]
}

fn feed_keys(feed: &Feed) -> Keys {
    let Feed {
        bank: _,
        topic: TopicTemplate {
            levels,
            source_level: _,
        },
        payload,
        recording:
            RecordingColumns {
                time,
                source,
                value,
                cycle,
                bank,
            },
    } = feed;
    let mut keys = vec![("topic", levels.join("/"))];
    match payload {
        PayloadForm::Number => keys.push(("payload.form", "number".to_owned())),
        PayloadForm::Json(pointers) => keys.extend(pointer_keys(pointers)),
    }
    keys.extend([
        ("recording.time", time.clone()),
        ("recording.source", source.clone()),
        ("recording.value", value.clone()),
        ("recording.cycle", cycle.clone()),
        ("recording.bank", bank.clone()),
    ]);
    keys
}

fn pointer_keys(pointers: &JsonPointers) -> Keys {
    let JsonPointers {
        value,
        source,
        time,
        time_form,
        cycle,
    } = pointers;
    let form = match time_form {
        TimeForm::Auto => "auto",
        TimeForm::Rfc3339 => "rfc3339",
        TimeForm::EpochSeconds => "epoch_seconds",
        TimeForm::EpochMilliseconds => "epoch_milliseconds",
    };
    let text = |pointer: &Option<String>| pointer.clone().unwrap_or_default();
    vec![
        ("payload.form", "json".to_owned()),
        ("payload.value", value.clone()),
        ("payload.source", text(source)),
        ("payload.time", text(time)),
        ("payload.time_form", form.to_owned()),
        ("payload.cycle", text(cycle)),
    ]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_key_says_where_it_came_from() {
        let file = include_str!("../../config/smallest.toml");
        let variable = ("EVENROW__STORE__KEEP_DAYS".to_owned(), "30".to_owned());
        let settings = Settings::parse(file, "smallest.toml", [variable]).expect("good");
        let list = settings.list();
        let find = |section: &str, key: &str| {
            let mut those = list.iter().filter(|s| s.section.starts_with(section));
            let found = those.find(|s| s.key == key);
            found.unwrap_or_else(|| panic!("{section}.{key}: {list:#?}"))
        };
        let variable = Origin::Variable("EVENROW__STORE__KEEP_DAYS".to_owned());
        assert_eq!(find("store", "keep_days").origin, variable);
        assert_eq!(find("store", "keep_days").value, "30");
        assert_eq!(find("bank.", "spread_margin").origin, Origin::Default);
        for (section, key) in [
            ("plant", "name"),
            ("bank.", "margin"),
            ("bank.", "payload.form"),
        ] {
            let found = find(section, key);
            assert!(
                matches!(found.origin, Origin::File { line: 1.. }),
                "{found:?}"
            );
        }
        assert!(find("web", "token_file").value.is_empty());
    }
}
