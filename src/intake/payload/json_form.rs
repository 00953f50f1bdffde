//! The form `json`: one measurement, a list of them, or an object whose members are named by their
//! sources.
//!
//! What must hold: what stands once for the whole message (its time, its cycle) is read once; when it
//! is wrong the message is refused as a whole, and an item that is wrong costs no other item.

use std::borrow::Cow;

use serde_json::value::RawValue;

use crate::model::{Reason, Time};
use crate::settings::{Fields, Items, JsonForm, Of, Pointer, SourceAt, UnitAt};

use super::number::shown;
use super::{Decoded, Decodings, Fault, json, source_of_topic};

/// Decodes a message.
pub(super) fn decode<'a>(
    form: &'a JsonForm,
    text: &'a str,
    topic_source: Option<&'a str>,
) -> Result<Decodings<'a>, Fault> {
    let document = json::document(text)?;
    let message = Message::read(&form.fields, document, topic_source)?;
    match &form.items {
        Items::One => Ok(vec![Ok(message.item(document, None)?)]),
        Items::List(at) => {
            let list = json::required(document, at, "list")?;
            if !json::is_list(list) {
                return Err(not_what("list", at));
            }
            let items = (1..).zip(json::elements(list)?);
            let item = |(n, item): (usize, _)| {
                let decoded = message.item(item, None);
                decoded.map_err(|fault| fault.within(format_args!("item {n}")))
            };
            filled("list", at, items.map(item).collect())
        }
        Items::BySource(at) => {
            let object = json::required(document, at, "object of sources")?;
            if !json::is_object(object) {
                return Err(not_what("object", at));
            }
            let shared = shared_names(&form.fields, at);
            let members = json::members(object)?.into_iter();
            let sources = members.filter(|(name, _)| !shared.contains(name));
            let item = |(name, item): (Cow<'a, str>, _)| {
                let decoded = message.item(item, Some(name.clone()));
                decoded.map_err(|fault| fault.of_source(&name))
            };
            filled("object", at, sources.map(item).collect())
        }
    }
}

fn not_what(what: &str, at: &str) -> Fault {
    let detail = format!("what stands at \"{at}\" is no {what}");
    Fault::new(Reason::Malformed, detail)
}

/// A message without items says nothing, which is told.
fn filled<'a>(what: &str, at: &str, all: Decodings<'a>) -> Result<Decodings<'a>, Fault> {
    if all.is_empty() {
        let detail = format!("the {what} at \"{at}\" holds no measurement");
        return Err(Fault::new(Reason::FieldMissing, detail));
    }
    Ok(all)
}

/// The members of the object at `at` that are no sources, because a pointer for the whole message
/// leads to or through them.
fn shared_names<'p>(fields: &'p Fields<Pointer>, at: &str) -> Vec<Cow<'p, str>> {
    let unit = fields.unit.as_ref().map(|unit| &unit.at);
    let pointers = [fields.time.as_ref(), fields.cycle.as_ref(), unit];
    let shared = pointers
        .into_iter()
        .flatten()
        .filter(|p| p.of == Of::Message);
    let inside = shared.filter_map(|p| p.path.strip_prefix(at)?.strip_prefix('/'));
    inside
        .map(|rest| json::unescaped(rest.split('/').next().unwrap_or(rest)))
        .collect()
}

/// What a message says once, and how to read the rest from an item.
struct Message<'a> {
    fields: &'a Fields<Pointer>,
    topic_source: Option<&'a str>,
    taken: Option<Time>,
    cycle: Option<i64>,
    source: Option<Cow<'a, str>>,
}

impl<'a> Message<'a> {
    fn read(
        fields: &'a Fields<Pointer>,
        document: &'a RawValue,
        topic_source: Option<&'a str>,
    ) -> Result<Self, Fault> {
        let mut message = Self {
            fields,
            topic_source,
            taken: None,
            cycle: None,
            source: None,
        };
        let once = |pointer: &Pointer| pointer.of == Of::Message;
        if let Some(at) = fields.time.as_ref().filter(|p| once(p)) {
            message.taken = Some(message.time(document, at)?);
        }
        if let Some(at) = fields.cycle.as_ref().filter(|p| once(p)) {
            message.cycle = Some(cycle(document, at)?);
        }
        if let Some(unit) = fields.unit.as_ref().filter(|unit| once(&unit.at)) {
            checked_unit(document, unit)?;
        }
        match &fields.source {
            SourceAt::At(at) if once(at) && topic_source.is_none() => {
                message.source = Some(source(document, at)?);
            }
            SourceAt::Counted { counter, turn } if once(counter) => {
                let (name, cycle) = turn.of(piece(document, counter)?);
                message.source = Some(Cow::Borrowed(name));
                message.cycle = Some(cycle);
            }
            _ => {}
        }
        Ok(message)
    }

    /// Reads the rest from an item; `member` is the name under which it stands.
    fn item(&self, item: &'a RawValue, member: Option<Cow<'a, str>>) -> Result<Decoded<'a>, Fault> {
        let fields = self.fields;
        let own = |pointer: &&Pointer| pointer.of == Of::Item;
        let mut cycle = match fields.cycle.as_ref().filter(own) {
            Some(at) => Some(self::cycle(item, at)?),
            None => self.cycle,
        };
        let source = match (&self.source, self.topic_source, &fields.source) {
            (_, Some(topic), _) => Cow::Borrowed(topic),
            (Some(shared), None, _) => shared.clone(),
            (None, None, SourceAt::At(at)) => self::source(item, at)?,
            (None, None, SourceAt::Counted { counter, turn }) => {
                let (name, of) = turn.of(piece(item, counter)?);
                cycle = Some(of);
                Cow::Borrowed(name.as_ref())
            }
            (None, None, SourceAt::Member) => member.unwrap_or_default(),
            (None, None, SourceAt::Topic) => source_of_topic(None)?,
        };
        if let Some(unit) = fields.unit.as_ref().filter(|unit| own(&&unit.at)) {
            checked_unit(item, unit)?;
        }
        let taken = match fields.time.as_ref().filter(own) {
            Some(at) => Some(self.time(item, at)?),
            None => self.taken,
        };
        let value = json::value(json::required(item, &fields.value.path, "value")?)?;
        Ok(Decoded {
            source,
            value,
            taken,
            cycle,
        })
    }

    fn time(&self, from: &RawValue, at: &Pointer) -> Result<Time, Fault> {
        let raw = json::required(from, &at.path, "time")?;
        json::time(raw, &self.fields.time_form)
    }
}

fn cycle(from: &RawValue, at: &Pointer) -> Result<i64, Fault> {
    json::cycle(json::required(from, &at.path, "cycle")?)
}

fn piece(from: &RawValue, at: &Pointer) -> Result<i64, Fault> {
    json::cycle(json::required(from, &at.path, "counter")?)
}

fn source<'a>(from: &'a RawValue, at: &Pointer) -> Result<Cow<'a, str>, Fault> {
    json::source(json::required(from, &at.path, "source")?)
}

fn checked_unit(from: &RawValue, unit: &UnitAt<Pointer>) -> Result<(), Fault> {
    let raw = json::required(from, &unit.at.path, "unit")?;
    match json::text(raw) {
        Some(text) => super::same_unit(&text, &unit.wanted),
        None => {
            let detail = format!("the unit is {}, not text", shown(raw.get()));
            Err(Fault::new(Reason::WrongUnit, detail))
        }
    }
}
