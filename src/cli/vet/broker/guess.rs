//! What messages of no bank may be: numbers or JSON, which level or member names the source, where value,
//! time and cycle stand.
//!
//! A guess, told as one: it is pasted and edited. It is made from the shape of topics and payloads and
//! never from names, which differ from plant to plant and from language to language.

use std::collections::{BTreeMap, BTreeSet};

use crate::intake::payload::sparkplug::NAMESPACE;
use crate::model::{Time, Value};

use super::survey::Kept;

/// A group of messages that may be a bank.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(super) struct Guess {
    /// The topic as a bank writes it.
    pub(super) topic: String,
    /// The payload as a bank writes it.
    pub(super) payload: String,
    /// Whether there is a cycle.
    pub(super) cycle: bool,
}

/// More members than this are no message of a scale.
const MOST_MEMBERS: usize = 50;
/// A name of a source comes again and again.
const LEAST_REPEATS: usize = 2;

/// The guesses, the one with most messages first, and which messages each was made from.
pub(super) fn guesses(kept: &[Kept]) -> Vec<(Guess, Vec<&Kept>)> {
    let mut left: BTreeMap<&str, Vec<&Kept>> = BTreeMap::new();
    for message in kept
        .iter()
        .filter(|message| !message.topic.starts_with(NAMESPACE))
    {
        left.entry(&message.topic).or_default().push(message);
    }
    let mut found = Vec::new();
    while let Some((topic, topics)) = most_alike(&left) {
        let messages: Vec<&Kept> = topics
            .iter()
            .filter_map(|topic| left.remove(topic.as_str()))
            .flatten()
            .collect();
        found.extend(guess(topic, messages));
    }
    for (topic, messages) in left {
        found.extend(guess(topic.to_owned(), messages));
    }
    found.sort_by_key(|(_, messages)| std::cmp::Reverse(messages.len()));
    found
}

/// The template that fits most topics with payloads of one shape, at least two, and those topics.
fn most_alike(left: &BTreeMap<&str, Vec<&Kept>>) -> Option<(String, Vec<String>)> {
    let mut templates: BTreeMap<(String, Vec<String>), BTreeSet<String>> = BTreeMap::new();
    for (topic, messages) in left {
        let shape = messages.first().and_then(|message| shape(&message.payload));
        let Some(shape) = shape else {
            continue;
        };
        let levels: Vec<&str> = topic.split('/').collect();
        for at in 0..levels.len() {
            let mut template = levels.clone();
            template[at] = "{source}";
            let key = (template.join("/"), shape.clone());
            templates
                .entry(key)
                .or_default()
                .insert((*topic).to_owned());
        }
    }
    let most = templates
        .into_iter()
        .max_by_key(|(_, topics)| topics.len())?;
    let ((template, _), topics) = most;
    (topics.len() > 1).then(|| (template, topics.into_iter().collect()))
}

/// The kinds of payload that can be guessed: nothing for a number, else the names of the members.
fn shape(payload: &[u8]) -> Option<Vec<String>> {
    let text = std::str::from_utf8(payload).ok()?;
    if Value::parse(text).is_ok() {
        return Some(Vec::new());
    }
    let members = members(text)?;
    Some(members.into_keys().collect())
}

/// The numbers and texts of an object and of the objects in it, by pointer.
fn members(text: &str) -> Option<BTreeMap<String, serde_json::Value>> {
    let serde_json::Value::Object(object) = serde_json::from_str(text).ok()? else {
        return None;
    };
    let mut all = BTreeMap::new();
    for (name, value) in object {
        let at = format!("/{}", escaped(&name));
        match value {
            serde_json::Value::Object(inner) => {
                for (name, value) in inner {
                    all.insert(format!("{at}/{}", escaped(&name)), value);
                }
            }
            value => {
                all.insert(at, value);
            }
        }
    }
    all.retain(|_, value| value.is_number() || value.is_string());
    (!all.is_empty() && all.len() <= MOST_MEMBERS).then_some(all)
}

fn escaped(name: &str) -> String {
    name.replace('~', "~0").replace('/', "~1")
}

fn guess(topic: String, mut messages: Vec<&Kept>) -> Option<(Guess, Vec<&Kept>)> {
    // They came together topic by topic; counters only count in the order of arrival.
    messages.sort_by_key(|message| message.now);
    let in_topic = topic.contains("{source}");
    let first = shape(&messages.first()?.payload)?;
    if first.is_empty() {
        let payload = "\"number\"".to_owned();
        return in_topic.then_some((
            Guess {
                topic,
                payload,
                cycle: false,
            },
            messages,
        ));
    }
    let rows: Vec<(&Kept, BTreeMap<String, serde_json::Value>)> = messages
        .iter()
        .filter_map(|message| {
            Some((
                *message,
                members(std::str::from_utf8(&message.payload).ok()?)?,
            ))
        })
        .collect();
    let columns: Vec<Column<'_>> = first.iter().map(|at| Column::new(at, &rows)).collect();
    let time = columns.iter().find(|column| column.is_time());
    let others = |column: &&Column<'_>| time.is_none_or(|time| time.at != column.at);
    let source = match in_topic {
        true => None,
        false => Some(
            columns
                .iter()
                .filter(others)
                .find(|column| column.names_sources())?,
        ),
    };
    let others =
        |column: &&Column<'_>| others(column) && source.is_none_or(|source| source.at != column.at);
    let cycle = columns.iter().filter(others).find(|column| column.counts());
    let others =
        |column: &&Column<'_>| others(column) && cycle.is_none_or(|cycle| cycle.at != column.at);
    let numbers = || {
        columns
            .iter()
            .filter(others)
            .filter(|column| column.is_number())
    };
    let value = numbers()
        .find(|c| c.has_parts())
        .or_else(|| numbers().find(|c| c.distinct > 1))?;
    let mut payload = format!("{{ form = \"json\", value = {}", quoted(value.at));
    for (name, column) in [("source", source), ("time", time), ("cycle", cycle)] {
        if let Some(column) = column {
            payload.push_str(&format!(", {name} = {}", quoted(column.at)));
        }
    }
    payload.push_str(" }");
    Some((
        Guess {
            topic,
            payload,
            cycle: cycle.is_some(),
        },
        messages,
    ))
}

/// Text as TOML writes it.
pub(super) fn quoted(text: &str) -> String {
    let escape = |c: char| match c {
        '"' | '\\' => format!("\\{c}"),
        c if c.is_control() => format!("\\u{:04X}", u32::from(c)),
        c => c.to_string(),
    };
    format!("\"{}\"", text.chars().map(escape).collect::<String>())
}

/// One member over all messages.
struct Column<'r> {
    at: &'r str,
    values: Vec<(&'r Kept, &'r serde_json::Value)>,
    distinct: usize,
}

impl<'r> Column<'r> {
    fn new(at: &'r str, rows: &'r [(&'r Kept, BTreeMap<String, serde_json::Value>)]) -> Self {
        let values: Vec<_> = rows
            .iter()
            .filter_map(|(kept, row)| Some((*kept, row.get(at)?)))
            .collect();
        let distinct: BTreeSet<String> =
            values.iter().map(|(_, value)| value.to_string()).collect();
        Self {
            at,
            values,
            distinct: distinct.len(),
        }
    }

    /// Within a day of its arrival, each.
    fn is_time(&self) -> bool {
        let near = |(kept, value): &(&Kept, &serde_json::Value)| {
            let time = match value {
                serde_json::Value::String(text) => Time::parse_rfc3339(text).ok(),
                value => value.as_f64().map(|x| {
                    let us = if x < 1e11 { x * 1e6 } else { x * 1e3 };
                    Time::from_us(us as i64)
                }),
            };
            time.is_some_and(|at| at.us_since(kept.now).abs() < crate::model::US_PER_DAY)
        };
        !self.values.is_empty() && self.values.iter().all(near)
    }

    fn is_number(&self) -> bool {
        self.values.iter().all(|(_, value)| value.is_number())
    }

    fn is_whole(&self) -> bool {
        self.values
            .iter()
            .all(|(_, value)| value.is_i64() || value.is_u64())
    }

    /// Some value has digits behind the point.
    fn has_parts(&self) -> bool {
        self.values.iter().any(|(_, value)| value.is_f64())
    }

    /// A few names or small numbers that come again and again, and not one after the other.
    fn names_sources(&self) -> bool {
        let names = self.values.iter().all(|(_, value)| value.is_string()) || self.is_whole();
        names
            && self.distinct > 1
            && self.values.len() >= LEAST_REPEATS * self.distinct
            && !(self.is_whole() && self.counts())
    }

    /// A whole number that rises and never falls.
    fn counts(&self) -> bool {
        let numbers: Option<Vec<i64>> = self
            .values
            .iter()
            .map(|(_, value)| value.as_i64())
            .collect();
        let rises = |numbers: Vec<i64>| numbers.is_sorted() && numbers.first() < numbers.last();
        numbers.is_some_and(rises)
    }
}
