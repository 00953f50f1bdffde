//! Where a bank's measurements come from: `topic`, `payload` and `recording`.

use crate::model::BankIx;
use crate::settings::check::{Check, unfit};
use crate::settings::fault::{FaultList, Place};
use crate::settings::keys;
use crate::settings::section::{Field, Spot};
use crate::settings::written::{WrittenPayload, WrittenRecording};
use crate::settings::{Feed, JsonPointers, PayloadForm, RecordingColumns, TimeForm, TopicTemplate};

/// The level that stands for the source.
const SOURCE: &str = "{source}";

/// The longest topic of MQTT.
const LONGEST_TOPIC: usize = 65_535;

/// The part of a bank as written that says where its measurements come from.
pub(super) struct WrittenFeed {
    pub(super) place: Place,
    pub(super) topic: Field<String>,
    pub(super) payload: Field<WrittenPayload>,
    pub(super) recording: Field<WrittenRecording>,
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
        payload,
        recording,
    } = written;
    let mut check = Check::new("bank", &place, faults);
    let topic = check.required(topic, "topic");
    let payload = check.required(payload, "payload");
    let topic_place = topic.peek().map(|spot| spot.place.clone());
    let topic = template(topic, &mut check);
    let says = payload.peek().map(|spot| &spot.value);
    // Of a form that is not known nothing can be said to be missing.
    let says = says.filter(|says| {
        let form = says.form.peek().map(|spot| spot.value.as_str());
        form.is_some_and(|form| FORMS.iter().any(|(word, _)| *word == form))
    });
    let without_cycle = says.is_some_and(|says| matches!(says.cycle, Field::Absent));
    if let (Some(topic), Some(place), Some(says)) = (&topic, &topic_place, says) {
        one_source(topic, place, says, faults);
    }
    let payload = form(payload, faults);
    let recording = columns(recording, faults);
    let source_in_topic = topic
        .as_ref()
        .is_some_and(|topic| topic.source_level.is_some());
    let whole = |topic, payload, recording| Feed {
        bank,
        topic,
        payload,
        recording,
    };
    Heard {
        feed: topic
            .zip(payload)
            .zip(recording)
            .map(|((t, p), r)| whole(t, p, r)),
        source_in_topic,
        without_cycle,
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

/// Which form a payload has.
#[derive(Clone, Copy, PartialEq)]
enum Form {
    Number,
    Json,
}

/// Their words.
const FORMS: [(&str, Form); 2] = [("number", Form::Number), ("json", Form::Json)];

fn form(field: Field<WrittenPayload>, faults: &mut FaultList) -> Option<PayloadForm> {
    let WrittenPayload {
        place,
        form,
        value,
        source,
        time,
        time_form,
        cycle,
    } = field.given()?.value;
    let mut check = Check::new("bank.payload", &place, faults);
    let form = check.required(form, "form");
    let form = check.word(form, "form", &FORMS)?.value;
    if form == Form::Number {
        let pointers = [
            ("value", &value),
            ("source", &source),
            ("time", &time),
            ("time_form", &time_form),
            ("cycle", &cycle),
        ];
        no_pointers(&pointers, &mut check);
        return Some(PayloadForm::Number);
    }
    let untimed = match (&time, time_form.peek()) {
        (Field::Absent, Some(spot)) => Some(spot.place.clone()),
        _ => None,
    };
    if let Some(place) = untimed {
        check.add(
            &place,
            "`time_form` is given without `time`",
            keys::example("bank.payload", "time"),
        );
    }
    let value = check.required(value, "value");
    let value = pointer(value, "value", &mut check);
    let source = pointer(source, "source", &mut check);
    let time = pointer(time, "time", &mut check);
    let cycle = pointer(cycle, "cycle", &mut check);
    let time_form = written_time(time_form, &mut check);
    Some(PayloadForm::Json(JsonPointers {
        value: value??,
        source: source?,
        time: time?,
        time_form,
        cycle: cycle?,
    }))
}

fn no_pointers(pointers: &[(&str, &Field<String>)], check: &mut Check<'_>) {
    for (name, field) in pointers {
        if let Some(spot) = field.peek() {
            check.add(
                &spot.place,
                format!(
                    "`{name}` means nothing with `form = \"number\"`: the payload is the number"
                ),
                "take it out, or write `form = \"json\"`",
            );
        }
    }
}

fn written_time(field: Field<String>, check: &mut Check<'_>) -> TimeForm {
    let known = [
        ("auto", TimeForm::Auto),
        ("rfc3339", TimeForm::Rfc3339),
        ("epoch_seconds", TimeForm::EpochSeconds),
        ("epoch_milliseconds", TimeForm::EpochMilliseconds),
    ];
    let form = check.word(field, "time_form", &known);
    form.map_or(TimeForm::Auto, |spot| spot.value)
}

/// A pointer of RFC 6901; the outer `None` when it is faulty, the inner when it is absent.
fn pointer(field: Field<String>, name: &str, check: &mut Check<'_>) -> Option<Option<String>> {
    let Spot { value, place } = match field {
        Field::Given(spot) => spot,
        Field::Absent => return Some(None),
        Field::Faulty => return None,
    };
    let (message, hint) = if !value.is_empty() && !value.starts_with('/') {
        let path = value.trim_start_matches("$.").replace('.', "/");
        (
            "must start with /",
            format!("write `{name} = \"/{}\"`", path.escape_debug()),
        )
    } else if escapes_badly(&value) {
        let hint = "in a pointer ~ is written ~0, and / inside a name ~1 (RFC 6901)";
        (
            "has a ~ that is followed by neither 0 nor 1",
            hint.to_owned(),
        )
    } else {
        return Some(Some(value));
    };
    check.add(&place, format!("the pointer `{name}` {message}"), hint);
    None
}

fn escapes_badly(pointer: &str) -> bool {
    let mut after_tildes = pointer.split('~').skip(1);
    after_tildes.any(|rest| !rest.starts_with(['0', '1']))
}

/// The source stands in one place: in the topic or in the payload.
fn one_source(
    topic: &TopicTemplate,
    topic_place: &Place,
    payload: &WrittenPayload,
    faults: &mut FaultList,
) {
    let number = payload
        .form
        .peek()
        .is_some_and(|spot| spot.value == "number");
    match (topic.source_level, &payload.source) {
        // That a number has no pointers is said elsewhere.
        (Some(_), Field::Given(pointer)) if !number => faults.add(
            &pointer.place,
            "the source is told twice: by {source} in the topic and by `source` in the payload",
            "keep the one that is right: write + in the topic, or take `source` out",
        ),
        (None, Field::Absent) => faults.add(
            topic_place,
            "nothing names the source: no {source} in the topic and no `source` in the payload",
            "write {source} for the level of the topic that names it, or `source = \"/head\"` into a \
             payload of form \"json\"",
        ),
        (Some(_) | None, _) => {}
    }
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
