//! The form `opc_ua_json`: OPC UA PubSub in JSON (OPC 10000-14 §7.2.5, version 1.05, and 1.04), with
//! values in the JSON encoding of OPC 10000-6 §5.4.
//!
//! A network message (`ua-data`), a list of data set messages, a single one, or the fields alone; a field
//! is a raw value, a variant, or a value with its status and time of source. A delta frame carries only
//! the fields that changed: only those are fresh measurements, while cycle and source are
//! remembered for each writer. What must hold: nothing with a status other than good becomes a
//! measurement; memory is bounded by the number of writers. Deliberately absent: meta data messages,
//! which say nothing that the configuration does not.

use std::borrow::Cow;
use std::collections::HashMap;

use serde_json::value::RawValue;

use crate::model::{Reason, Time, Value, ValueError};
use crate::settings::{OpcUaForm, TimeForm};

use super::number::shown;
use super::{Decoded, Decodings, Fault, json, source_of_topic};

/// Writers whose last cycle and source are remembered; a plant's configuration has far fewer.
const MOST_WRITERS: usize = 1000;

/// The built-in types whose numbers are written as text: Int64 and UInt64 (OPC 10000-6 §5.1.2, §5.4.2.3).
const WRITTEN_AS_TEXT: [i64; 2] = [8, 9];

/// The built-in types that are numbers, SByte to Double (OPC 10000-6 §5.1.2).
const NUMBERS: std::ops::RangeInclusive<i64> = 2..=11;

/// What the writers said last.
#[derive(Clone, Debug, Default)]
pub(super) struct Writers(HashMap<String, Last>);

#[derive(Clone, Debug, Default)]
struct Last {
    cycle: Option<i64>,
    source: Option<String>,
}

/// Decodes a message.
pub(super) fn decode<'a>(
    form: &OpcUaForm,
    writers: &mut Writers,
    text: &'a str,
    topic_source: Option<&'a str>,
) -> Result<Decodings<'a>, Fault> {
    let document = json::document(text)?;
    let mut all = Vec::new();
    let mut each = |publisher: &str, raw| -> Result<(), Fault> {
        let mut context = Context {
            form,
            writers,
            topic_source,
            publisher,
        };
        let decoded = context.data_set_message(raw);
        all.extend(decoded?);
        Ok(())
    };
    if json::is_list(document) {
        for message in json::elements(document)? {
            each("", message)?;
        }
    } else if json::is_object(document) {
        let at = |name: &str| json::find(document, name);
        match (at("/Messages")?, at("/MessageType")?.and_then(json::text)) {
            (Some(messages), Some(kind)) if kind == "ua-data" => {
                let publisher = at("/PublisherId")?.map_or("", RawValue::get);
                if json::is_list(messages) {
                    for message in json::elements(messages)? {
                        each(publisher, message)?;
                    }
                } else {
                    each(publisher, messages)?;
                }
            }
            // Meta data, applications, status and the like.
            (_, Some(kind)) if is_other_network_message(&kind) => {}
            _ => each("", document)?,
        }
    } else {
        let detail = "an OPC UA message is an object or a list";
        return Err(Fault::new(Reason::Malformed, detail));
    }
    Ok(all)
}

/// Whether a message type is one of network messages without data (OPC 10000-14, table 183).
fn is_other_network_message(kind: &str) -> bool {
    let data = [
        "ua-keyframe",
        "ua-deltaframe",
        "ua-event",
        "ua-keepalive",
        "ua-data",
    ];
    kind.starts_with("ua-") && !data.contains(&kind)
}

/// Reads data set messages of one network message.
struct Context<'c, 'a> {
    form: &'c OpcUaForm,
    writers: &'c mut Writers,
    topic_source: Option<&'a str>,
    publisher: &'c str,
}

impl<'a> Context<'_, 'a> {
    fn data_set_message(&mut self, raw: &'a RawValue) -> Result<Decodings<'a>, Fault> {
        if !json::is_object(raw) {
            let detail = "a data set message is an object";
            return Err(Fault::new(Reason::Malformed, detail));
        }
        let at = |name: &str| json::find(raw, name);
        let text = |name: &str| Ok::<_, Fault>(at(name)?.and_then(json::text));
        let kind = text("/MessageType")?;
        let writer = text("/DataSetWriterName")?;
        if self.form.writer.is_some() && self.form.writer.as_deref() != writer.as_deref() {
            return Ok(Vec::new());
        }
        let headed = at("/DataSetWriterId")?.is_some() || writer.is_some() || kind.is_some();
        let payload = match at("/Payload")? {
            Some(payload) => payload,
            // A keep-alive is a message without fields.
            None if headed => return Ok(Vec::new()),
            None => raw,
        };
        good(at("/Status")?.filter(|_| headed).map_or(Ok(0), status)?)?;
        let taken = match at("/Timestamp")?.filter(|_| headed) {
            Some(time) => Some(json::time(time, &TimeForm::Rfc3339)?),
            None => None,
        };
        let id = at("/DataSetWriterId")?.map_or("", RawValue::get);
        let key = format!("{}\n{id}\n{}", self.publisher, writer.unwrap_or_default());
        let delta = kind.as_deref() == Some("ua-deltaframe");
        self.fields(payload, taken, &key, delta)
    }

    fn fields(
        &mut self,
        payload: &'a RawValue,
        taken: Option<Time>,
        writer: &str,
        delta: bool,
    ) -> Result<Decodings<'a>, Fault> {
        if !json::is_object(payload) {
            let detail = "the payload of a data set message is an object";
            return Err(Fault::new(Reason::Malformed, detail));
        }
        let form = self.form;
        let members = json::members(payload)?;
        let said = |name: &Option<String>| {
            let name = name.as_deref()?;
            members
                .iter()
                .find(|(field, _)| field == name)
                .map(|(_, raw)| *raw)
        };
        let mut last = self.writers.0.get(writer).cloned().unwrap_or_default();
        if let Some(raw) = said(&form.cycle) {
            last.cycle = Some(Field::read(raw)?.cycle()?);
        }
        if let Some(raw) = said(&form.source) {
            last.source = Some(json::source(Field::read(raw)?.good()?)?.into_owned());
        }
        let measured = |(name, raw): &(Cow<'a, str>, &'a RawValue)| {
            let named = form.field.matches(name)?.map(str::to_owned);
            Some(self.measurement(raw, named, &last, taken))
        };
        let all: Decodings<'a> = members.iter().filter_map(measured).collect();
        let remembers = form.cycle.is_some() || form.source.is_some();
        let known = self.writers.0.contains_key(writer);
        if remembers && (known || self.writers.0.len() < MOST_WRITERS) {
            self.writers.0.insert(writer.to_owned(), last);
        }
        if all.is_empty() && !delta {
            let detail = format!("there is no field \"{}\"", form.field.written());
            return Err(Fault::new(Reason::FieldMissing, detail));
        }
        Ok(all)
    }

    fn measurement(
        &self,
        raw: &'a RawValue,
        named: Option<String>,
        last: &Last,
        taken: Option<Time>,
    ) -> Result<Decoded<'a>, Fault> {
        let field = Field::read(raw)?;
        let own = named.or_else(|| last.source.clone());
        let source = match (self.topic_source, own) {
            (Some(topic), _) => Cow::Borrowed(topic),
            (None, Some(own)) => Cow::Owned(own),
            (None, None) => source_of_topic(None)?,
        };
        if self.form.cycle.is_some() && last.cycle.is_none() {
            let detail = "the field with the cycle has not been sent yet";
            return Err(Fault::new(Reason::FieldMissing, detail));
        }
        Ok(Decoded {
            source,
            value: field.value()?,
            taken: field.taken.or(taken),
            cycle: last.cycle,
        })
    }
}

/// A field: raw, a variant or a value with status and time.
struct Field<'a> {
    raw: &'a RawValue,
    /// The built-in type, where it is told.
    kind: Option<i64>,
    status: i64,
    taken: Option<Time>,
}

impl<'a> Field<'a> {
    fn read(raw: &'a RawValue) -> Result<Self, Fault> {
        let mut field = Self {
            raw,
            kind: None,
            status: 0,
            taken: None,
        };
        // A value with status may hold a variant: at most two levels.
        for _ in 0..2 {
            if !json::is_object(field.raw) || !field.unwrap()? {
                break;
            }
        }
        Ok(field)
    }

    /// Goes one level in; whether there was one.
    fn unwrap(&mut self) -> Result<bool, Fault> {
        let mut inner = None;
        let mut coded = None;
        for (name, raw) in json::members(self.raw)? {
            match name.as_ref() {
                "Type" | "UaType" => self.kind = json::cycle(raw).ok(),
                "Body" | "Value" => inner = Some(raw),
                "Status" | "StatusCode" => self.status = status(raw)?,
                "SourceTimestamp" => self.taken = Some(json::time(raw, &TimeForm::Rfc3339)?),
                "Code" => coded = Some(raw),
                _ => {}
            }
        }
        match (inner, coded) {
            (Some(inner), _) => {
                self.raw = inner;
                Ok(true)
            }
            // A status stands where the value should.
            (None, Some(code)) => {
                self.status = status(code)?;
                Ok(false)
            }
            // The compact encoding leaves out a value that is the default of its type: 0.
            (None, None) if NUMBERS.contains(&self.kind.unwrap_or_default()) => {
                self.raw = serde_json::from_str("0").unwrap_or(self.raw);
                Ok(false)
            }
            (None, None) => Ok(false),
        }
    }

    /// The value's text, when its status is good.
    fn good(&self) -> Result<&'a RawValue, Fault> {
        // A status code in place of a value is of the built-in type StatusCode, 19.
        let status = match self.kind {
            Some(19) => self::status(self.raw)?,
            _ => self.status,
        };
        good(status)?;
        Ok(self.raw)
    }

    fn value(&self) -> Result<Value, Fault> {
        let raw = self.good()?;
        let Some(text) = json::text(raw) else {
            return json::value(raw);
        };
        let not = |reason, why: &str| {
            Err(Fault::new(
                reason,
                format!("the value {} {why}", shown(&text)),
            ))
        };
        match Value::parse(&text) {
            Ok(value)
                if self
                    .kind
                    .is_some_and(|kind| WRITTEN_AS_TEXT.contains(&kind)) =>
            {
                Ok(value)
            }
            // The encoding writes these three as text, having no other way.
            Err(ValueError::NotFinite) => not(Reason::NotFinite, "is not a finite number"),
            _ => json::value(raw),
        }
    }

    fn cycle(&self) -> Result<i64, Fault> {
        let raw = self.good()?;
        match json::text(raw) {
            // Counters are often 64 bits wide, and those are written as text.
            Some(text) => json::whole(&text),
            None => json::cycle(raw),
        }
    }
}

/// A status code: a number (1.04), or an object with a number that is left out when it is good.
fn status(raw: &RawValue) -> Result<i64, Fault> {
    let code = match json::is_object(raw) {
        true => match json::find(raw, "/Code")? {
            None => return Ok(0),
            Some(code) => code,
        },
        false => raw,
    };
    json::cycle(code).map_err(|_| {
        let detail = format!("the status {} is no number", shown(code.get()));
        Fault::new(Reason::BadQuality, detail)
    })
}

/// Refuses every status whose severity, the upper two of 32 bits, is not 0 (OPC 10000-4 §7.39).
fn good(status: i64) -> Result<(), Fault> {
    let word = match status >> 30 {
        0 => return Ok(()),
        1 => "uncertain",
        _ => "bad",
    };
    let detail = format!("the sender calls the value {word} (status 0x{status:08X})");
    Err(Fault::new(Reason::BadQuality, detail))
}
