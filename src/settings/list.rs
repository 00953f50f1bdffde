//! The settings as used as a list of keys, each with where its value came from: what the page and the
//! interface show.
//!
//! What must hold: every key of the configuration is there (full destructuring; of outlets, payloads and
//! what is believed, the keys that were given), and no secret is: secrets stand in files, and only the
//! files' names are settings.

use std::collections::BTreeMap;
use std::path::PathBuf;

use crate::model::{
    Bank, Characteristic, Layout, Name, Offsets, Pairing, Sources, US_PER_DAY, Value,
};
use crate::notice::{Latching, Manners};

use super::check::words;
use super::fault::Place;
use super::raw::{Kind, Node, Table};
use super::used::{
    Broker, Feed, PlantSettings, Protocol, RecordingColumns, Settings, StoreSettings,
    TopicTemplate, WebSettings,
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

/// The keys that were given, by their path (`web.listen`, `bank.filler-2.margin`): where each stands and
/// what it says.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Origins(BTreeMap<String, (Origin, String)>);

/// One key.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Setting {
    /// The section: `web`, or `bank` with its name.
    pub section: String,
    /// The key, with a point before keys of a table inside.
    pub key: String,
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
        found.map_or(Origin::Default, |(origin, _)| origin.clone())
    }

    /// The keys given under this path, with what they say.
    fn given(&self, section: &str, under: &str) -> Keys {
        let start = format!("{section}.");
        let below = self.0.range(start.clone()..);
        let below = below.take_while(|(path, _)| path.starts_with(&start));
        let named = |path: &str| match &path[start.len()..] {
            // The word alone stands for a table with that form.
            "payload" => "payload.form".to_owned(),
            key => key.to_owned(),
        };
        let keys = below.map(|(path, (_, text))| (named(path), text.clone()));
        keys.filter(|(key, _)| under.is_empty() || key.split('.').next() == Some(under))
            .collect()
    }

    /// The names of the outlets.
    fn outlets(&self) -> Vec<String> {
        let named = |path: &String| {
            let rest = path.strip_prefix("outlet.")?;
            Some(rest.strip_suffix(".way")?.to_owned())
        };
        self.0.keys().filter_map(named).collect()
    }
}

fn walk(table: &Table, before: &str, found: &mut BTreeMap<String, (Origin, String)>) {
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
            value => {
                let origin = match &entry.key {
                    Place::Variable(name) => Origin::Variable(name.clone()),
                    place => Origin::File {
                        line: place.line().unwrap_or(0),
                    },
                };
                found.insert(path, (origin, said(value)));
            }
        }
    }
}

/// A value as it was written.
fn said(value: &Kind) -> String {
    match value {
        Kind::Text(text) | Kind::Number(text) | Kind::Variable(text) => text.clone(),
        Kind::Whole(number) => number.map_or_else(String::new, |n| n.to_string()),
        Kind::Flag(flag) => flag.to_string(),
        Kind::List(items) => {
            let all: Vec<String> = items.iter().map(|i| said(&i.kind)).collect();
            all.join(", ")
        }
        Kind::Moment | Kind::Table(_) => String::new(),
    }
}

fn name_of(table: &Table) -> &str {
    match table.get("name").map(|entry| &entry.node.kind) {
        Some(Kind::Text(name)) => name,
        _ => "",
    }
}

/// Keys of a section with their values.
type Keys = Vec<(String, String)>;

/// Fixed keys with their values.
fn keys<const N: usize>(pairs: [(&'static str, String); N]) -> Keys {
    let owned = |(key, value): (&str, String)| (key.to_owned(), value);
    pairs.into_iter().map(owned).collect()
}

impl Settings {
    /// Every key with its value and where that came from.
    pub fn list(&self) -> Vec<Setting> {
        let Self {
            plant,
            broker,
            store,
            web,
            manners,
            banks,
            feeds,
            // Shown as given, below.
            outlets: _,
            origins,
        } = self;
        let mut sections = vec![
            ("plant".to_owned(), plant_keys(plant)),
            ("broker".to_owned(), broker_keys(broker)),
            ("store".to_owned(), store_keys(store)),
            ("web".to_owned(), web_keys(web)),
            ("notices".to_owned(), notices_keys(manners)),
        ];
        for (bank, feed) in banks.iter().zip(feeds) {
            let section = format!("bank.{}", bank.name);
            let mut keys = [bank_keys(bank), feed_keys(feed)].concat();
            for under in ["payload", "sentinels", "plausible", "groups"] {
                keys.extend(origins.given(&section, under));
            }
            sections.push((section, keys));
        }
        for name in origins.outlets() {
            let section = format!("outlet.{name}");
            let keys = origins.given(&section, "");
            sections.push((section, keys));
        }
        let mut all = Vec::new();
        for (section, keys) in sections {
            all.extend(keys.into_iter().map(|(key, value)| Setting {
                origin: origins.find(&section, &key),
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
    keys([
        ("name", name.to_string()),
        ("time_zone", zone.iana_name().unwrap_or_default().to_owned()),
        ("shift", shifts.join(", ")),
    ])
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
    keys([
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
    ])
}

fn store_keys(StoreSettings { folder, keep_days }: &StoreSettings) -> Keys {
    keys([
        ("folder", folder.display().to_string()),
        ("keep_days", keep_days.to_string()),
    ])
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
    keys([
        ("listen", listen.to_string()),
        ("token_file", path(token_file.as_ref())),
        ("certificate_file", path(certificate_file.as_ref())),
        ("key_file", path(key_file.as_ref())),
        ("tls_in_front", tls_in_front.to_string()),
        ("address", address.clone().unwrap_or_default()),
    ])
}

fn notices_keys(manners: &Manners) -> Keys {
    let Manners {
        longest_shelving_us,
        latching,
        repeat_after_us,
        on_delay_us,
        off_delay_us,
        settling_us,
    } = manners;
    keys([
        ("longest_shelving", words(*longest_shelving_us)),
        ("latching", (*latching == Latching::On).to_string()),
        (
            "repeat_after",
            repeat_after_us.map_or_else(String::new, words),
        ),
        ("on_delay", words(*on_delay_us)),
        ("off_delay", words(*off_delay_us)),
        ("settling", words(*settling_us)),
    ])
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
        // Shown as given, below.
        groups: _,
        cost_per_unit,
        reference,
        offsets,
    } = bank;
    let pairing = match pairing {
        Pairing::Cycle => "cycle".to_owned(),
        Pairing::Slot { length_us } => format!("slot of {}", words(*length_us)),
        Pairing::None => "none".to_owned(),
        Pairing::Day => "day".to_owned(),
    };
    let sources = match sources {
        Sources::Listed(names) => names.join(", "),
        Sources::Discover { most } => format!("discover, at most {most}"),
        Sources::Shifts(_) => "shifts".to_owned(),
    };
    let spans: Vec<String> = spans.iter().map(ToString::to_string).collect();
    let name_of = |n: &Option<Name>| n.as_ref().map_or_else(String::new, ToString::to_string);
    let own = keys([
        ("name", name.to_string()),
        ("equipment", name_of(equipment)),
    ]);
    let rest = keys([
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
        ("reference", name_of(reference)),
        ("offsets", offset_words(offsets)),
        (
            "cost_per_unit",
            cost_per_unit.map_or_else(String::new, |c| c.to_string()),
        ),
    ]);
    [own, characteristic_keys(characteristic), rest].concat()
}

fn offset_words(offsets: &Offsets) -> String {
    match offsets {
        Offsets::None => "none".to_owned(),
        Offsets::Learn => "learn".to_owned(),
        Offsets::Table(table) => {
            let one = |(name, offset): &(Name, f64)| format!("{name} {offset}");
            table.iter().map(one).collect::<Vec<_>>().join(", ")
        }
    }
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
    keys([
        ("characteristic", name.to_string()),
        ("unit", unit.to_string()),
        ("resolution", number(*resolution)),
        ("target", value(*target)),
        ("declared", value(*declared)),
        ("limits.lower", number(*lower)),
        ("limits.upper", number(*upper)),
    ])
}

fn feed_keys(feed: &Feed) -> Keys {
    let Feed {
        bank: _,
        topic: TopicTemplate {
            levels,
            source_level: _,
        },
        // Shown as given.
        payload: _,
        belief: _,
        // Follows from `sources`.
        told_by: _,
        recording:
            RecordingColumns {
                time,
                source,
                value,
                cycle,
                bank,
            },
    } = feed;
    keys([
        ("topic", levels.join("/")),
        ("recording.time", time.clone()),
        ("recording.source", source.clone()),
        ("recording.value", value.clone()),
        ("recording.cycle", cycle.clone()),
        ("recording.bank", bank.clone()),
    ])
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
