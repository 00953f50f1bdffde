//! Where a bank's measurements come from: `topic`, `payload` and `recording`, and what is believed.

use jiff::tz::TimeZone;

use crate::model::{BankIx, Name};
use crate::settings::check::{Check, unfit};
use crate::settings::fault::{FaultList, Place};
use crate::settings::keys;
use crate::settings::raw::Node;
use crate::settings::section::{Field, Spot};
use crate::settings::written::{WrittenLimits, WrittenRecording};
use crate::settings::written_payload::WrittenPayload;
use crate::settings::{Feed, RecordingColumns, ToldBy, TopicTemplate};

use super::belief::belief;
use super::payload::{Around, payload};

/// The level that stands for the source.
const SOURCE: &str = "{source}";

/// The longest topic of MQTT.
const LONGEST_TOPIC: usize = 65_535;

/// The part of a bank as written that says where its measurements come from.
pub(super) struct WrittenFeed {
    pub(super) place: Place,
    pub(super) topic: Field<String>,
    pub(super) payload: Field<WrittenPayload>,
    pub(super) sentinels: Field<Vec<Node>>,
    pub(super) plausible: Field<WrittenLimits>,
    pub(super) recording: Field<WrittenRecording>,
    /// The unit of the bank, where it is given.
    pub(super) unit: Option<String>,
    /// The sources, where they are listed.
    pub(super) listed: Vec<Name>,
    /// The zone of the plant.
    pub(super) zone: TimeZone,
    /// What tells the source.
    pub(super) told_by: ToldBy,
}

/// The feed, and what the rest of the bank must know of it even when something in it is faulty.
pub(super) struct Heard {
    pub(super) feed: Option<Feed>,
    /// Whether sources are named by a level of the topic.
    pub(super) source_in_topic: bool,
    /// Whether the payload says nothing of a cycle.
    pub(super) without_cycle: bool,
}

/// The feed.
pub(super) fn feed(bank: BankIx, written: WrittenFeed, faults: &mut FaultList) -> Heard {
    let WrittenFeed {
        place,
        topic,
        payload: written,
        sentinels,
        plausible,
        recording,
        unit,
        listed,
        zone,
        told_by,
    } = written;
    let mut check = Check::new("bank", &place, faults);
    let topic = check.required(topic, "topic");
    let written = check.required(written, "payload");
    let topic_place = topic.peek().map(|spot| spot.place.clone());
    let topic = template(topic, &mut check);
    let around = Around {
        topic: topic.as_ref().zip(topic_place.as_ref()),
        unit,
        listed,
        zone,
        told_by,
    };
    let payload = payload(written, around, faults);
    let belief = belief(sentinels, plausible, faults);
    let recording = columns(recording, faults);
    let source_in_topic = topic
        .as_ref()
        .is_some_and(|topic| topic.source_level.is_some());
    let whole = |((topic, payload), recording)| Feed {
        bank,
        topic,
        payload,
        belief,
        recording,
        told_by,
    };
    Heard {
        feed: topic.zip(payload.form).zip(recording).map(whole),
        source_in_topic,
        without_cycle: payload.without_cycle,
    }
}

fn template(field: Field<String>, check: &mut Check<'_>) -> Option<TopicTemplate> {
    let Spot { value, place } = field.given()?;
    match levels(&value) {
        Ok(template) => Some(template),
        Err(what) => {
            let message = format!("`topic` {what}");
            check.add(&place, message, keys::example("bank", "topic"));
            None
        }
    }
}

/// Takes a topic apart by the rules of MQTT 5, section 4.7.
fn levels(topic: &str) -> Result<TopicTemplate, &'static str> {
    if topic.trim().is_empty() {
        return Err("is empty");
    }
    if topic.trim() != topic || topic.chars().any(char::is_control) {
        return Err("has blanks at its ends, or a control character");
    }
    if topic.len() > LONGEST_TOPIC {
        return Err("is longer than MQTT allows");
    }
    if topic.starts_with("$share/") {
        return Err(
            "is a shared subscription, which would give a part of the values to somebody else",
        );
    }
    let levels: Vec<String> = topic.split('/').map(str::to_owned).collect();
    let last = levels.len().saturating_sub(1);
    for (at, level) in levels.iter().enumerate() {
        match level.as_str() {
            SOURCE | "+" => {}
            "#" if at == last => {}
            "#" => return Err("has a # that is not its last level"),
            plain if plain.contains(['+', '#']) => {
                return Err("has a + or # that is not a whole level");
            }
            plain if plain.contains(SOURCE) => {
                return Err("has {source} as a part of a level; it must be a whole one");
            }
            plain if plain.contains(['{', '}']) => {
                return Err("has braces around another word than {source}");
            }
            _ => {}
        }
    }
    let mut found = levels
        .iter()
        .enumerate()
        .filter(|(_, level)| *level == SOURCE);
    let source_level = found.next().map(|(at, _)| at);
    if found.next().is_some() {
        return Err("has {source} twice");
    }
    Ok(TopicTemplate {
        levels,
        source_level,
    })
}

fn columns(field: Field<WrittenRecording>, faults: &mut FaultList) -> Option<RecordingColumns> {
    let own = RecordingColumns::default();
    let Spot { value, place } = match field {
        Field::Given(spot) => spot,
        Field::Absent => return Some(own),
        Field::Faulty => return None,
    };
    let WrittenRecording {
        time,
        source,
        value,
        cycle,
        bank,
    } = value;
    let mut taken: Vec<String> = Vec::new();
    let mut column = |field: Field<String>, name: &str, own: String| {
        let spot = field.given();
        let (column, at) = spot.map_or((own, place.clone()), |s| (s.value, s.place));
        let wrong = unfit(&column).or_else(|| {
            let twice = taken.contains(&column);
            twice.then(|| format!("is the column \"{column}\", which another key means too"))
        });
        if let Some(what) = wrong {
            faults.add(
                &at,
                format!("`{name}` {what}"),
                keys::example("bank.recording", name),
            );
        }
        taken.push(column.clone());
        column
    };
    Some(RecordingColumns {
        time: column(time, "time", own.time),
        source: column(source, "source", own.source),
        value: column(value, "value", own.value),
        cycle: column(cycle, "cycle", own.cycle),
        bank: column(bank, "bank", own.bank),
    })
}
