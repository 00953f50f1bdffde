//! `payload`: which form, and where things stand in it.
//!
//! Each form knows some of the keys; one that means nothing with it is a fault, because whoever wrote
//! it expects something of it.

use jiff::tz::TimeZone;

use crate::model::Name;
use crate::settings::check::Check;
use crate::settings::fault::{FaultList, Place};
use crate::settings::section::{Field, Spot};
use crate::settings::written_payload::{WrittenAt, WrittenPayload, WrittenSourceAt};
use crate::settings::{PayloadForm, ToldBy, TopicTemplate};

/// What the rest of the bank says that the payload must agree with.
pub(super) struct Around<'t> {
    pub(super) topic: Option<(&'t TopicTemplate, &'t Place)>,
    pub(super) unit: Option<String>,
    pub(super) listed: Vec<Name>,
    pub(super) zone: TimeZone,
    pub(super) told_by: ToldBy,
}

/// The payload, and what the rest of the bank must know of it even when something in it is faulty.
#[derive(Default)]
pub(super) struct Payload {
    pub(super) form: Option<PayloadForm>,
    /// Whether it says nothing of a cycle.
    pub(super) without_cycle: bool,
}

/// Which form a payload has.
#[derive(Clone, Copy, PartialEq)]
enum Form {
    Number,
    Json,
    Csv,
    Sparkplug,
    OpcUaJson,
    SenMl,
}

/// Their words.
const FORMS: [(&str, Form); 6] = [
    ("number", Form::Number),
    ("json", Form::Json),
    ("csv", Form::Csv),
    ("sparkplug", Form::Sparkplug),
    ("opc_ua_json", Form::OpcUaJson),
    ("senml", Form::SenMl),
];

impl Form {
    fn word(self) -> &'static str {
        FORMS
            .iter()
            .find(|(_, form)| *form == self)
            .map_or("", |(word, _)| word)
    }

    /// The keys that mean something.
    fn keys(self) -> &'static [&'static str] {
        match self {
            Self::Number => &[],
            Self::Json => &[
                "list",
                "by_source",
                "item",
                "value",
                "source",
                "time",
                "time_form",
                "cycle",
                "unit",
                "unit_written",
            ],
            Self::Csv => &[
                "value",
                "source",
                "time",
                "time_form",
                "cycle",
                "unit",
                "unit_written",
                "header",
                "separator",
                "decimal",
            ],
            Self::Sparkplug => &["value", "cycle", "reorder", "rebirth"],
            Self::OpcUaJson => &["value", "source", "cycle", "writer"],
            Self::SenMl => &["value", "cycle", "unit_written"],
        }
    }
}

/// The payload.
pub(super) fn payload(
    field: Field<WrittenPayload>,
    around: Around<'_>,
    faults: &mut FaultList,
) -> Payload {
    let Some(Spot { value: written, .. }) = field.given() else {
        return Payload::default();
    };
    let place = written.place.clone();
    let mut check = Check::new("bank.payload", &place, faults);
    let form = check.required(written.form.clone(), "form");
    let Some(form) = check.word(form, "form", &FORMS).map(|spot| spot.value) else {
        return Payload::default();
    };
    let strange: Vec<_> = written.given();
    let strange = strange
        .into_iter()
        .filter(|(name, _)| !form.keys().contains(name));
    let mut understood = true;
    for (name, place) in strange {
        understood = false;
        let (message, hint) = meaningless(form, name);
        check.add(&place, message, hint);
    }
    let item = written.item.peek().map(|spot| &spot.value);
    let nothing = matches!(written.cycle, Field::Absent)
        && item.is_none_or(|item| matches!(item.cycle, Field::Absent));
    let counted = [Some(&written.source), item.map(|item| &item.source)]
        .into_iter()
        .flatten()
        .any(|source| {
            matches!(
                source.peek().map(|s| &s.value),
                Some(WrittenSourceAt::Counted { .. })
            )
        });
    let without_cycle = nothing && !counted;
    if understood {
        one_source(form, &written, &around, &mut check);
    }
    let mut maker = Maker { around, check };
    let form = match form {
        Form::Number => Some(PayloadForm::Number),
        Form::Json => maker.json(written),
        Form::Csv => maker.csv(written),
        Form::Sparkplug => maker.sparkplug(written),
        Form::OpcUaJson => maker.opc_ua(written),
        Form::SenMl => maker.senml(written),
    };
    Payload {
        form,
        without_cycle,
    }
}

fn meaningless(form: Form, name: &str) -> (String, String) {
    let word = form.word();
    let knows = |other: &(&str, Form)| other.1.keys().contains(&name);
    let others: Vec<String> = FORMS
        .iter()
        .filter(|other| knows(other))
        .map(|(word, _)| format!("\"{word}\""))
        .collect();
    match form {
        Form::Number => (
            format!("`{name}` means nothing with `form = \"number\"`: the payload is the number"),
            format!(
                "take it out, or write a `form` that knows it: {}",
                others.join(", ")
            ),
        ),
        _ => (
            format!("`{name}` means nothing with `form = \"{word}\"`"),
            format!("take it out; it belongs to {}", others.join(", ")),
        ),
    }
}

/// The source stands in one place: in the topic or in the payload; and nowhere when the time tells it.
fn one_source(form: Form, written: &WrittenPayload, around: &Around<'_>, check: &mut Check<'_>) {
    let Some((topic, topic_place)) = around.topic else {
        return;
    };
    let item = written.item.peek().map(|spot| &spot.value);
    let templates = matches!(form, Form::Sparkplug | Form::OpcUaJson | Form::SenMl);
    let in_name = written.value.peek().filter(|spot| {
        templates && matches!(&spot.value, WrittenAt::Text(name) if name.contains("{source}"))
    });
    let places = [
        written.source.peek().map(|spot| &spot.place),
        written.by_source.peek().map(|spot| &spot.place),
        item.and_then(|item| item.source.peek())
            .map(|spot| &spot.place),
        in_name.map(|spot| &spot.place),
    ];
    let named: Vec<&Place> = places.into_iter().flatten().collect();
    if around.told_by == ToldBy::Time {
        let in_topic = topic.source_level.map(|_| topic_place);
        if let Some(place) = named.into_iter().chain(in_topic).next() {
            check.add(
                place,
                "a source is named, and with `sources = \"shifts\"` the time tells it",
                "write + in the topic, or take the source out of `payload`; to compare sources within \
                 shifts make another bank",
            );
        }
        return;
    }
    let sources = [Some(&written.source), item.map(|item| &item.source)];
    let nameless = templates && written.value.peek().is_none();
    let faulty = nameless
        || sources
            .into_iter()
            .flatten()
            .any(|field| matches!(field, Field::Faulty));
    match (topic.source_level, named.as_slice()) {
        (Some(_), [place, ..]) => check.add(
            place,
            "the source is told twice: by {source} in the topic and by `source` in the payload",
            "keep the one that is right: write + in the topic, or take `source` out",
        ),
        (None, []) if !faulty => check.add(
            topic_place,
            "nothing names the source: no {source} in the topic and no `source` in the payload",
            "write {source} for the level of the topic that names it, or `source = \"/head\"` into a \
             payload of form \"json\"",
        ),
        (None, [_, place, ..]) => check.add(
            place,
            "the source is told twice in the payload",
            "keep the one that is right",
        ),
        _ => {}
    }
}

/// Makes the form as used.
pub(super) struct Maker<'t, 'f> {
    pub(super) around: Around<'t>,
    pub(super) check: Check<'f>,
}
