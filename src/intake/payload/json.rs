//! The form `json`: pointers (RFC 6901) to value, source, time and cycle.
//!
//! What must hold: numbers stay the text they were sent as; a document is walked, never built, so
//! memory stays bounded by the payload and no depth of nesting touches the stack (`serde_json`
//! skips a value with a list of its own, not by recursion). A number written as text is refused: whoever
//! quotes numbers also writes decimal commas one day. A name that stands twice in an object is
//! refused, because readers disagree about which one counts (RFC 8259 §4).

use std::borrow::Cow;
use std::fmt;

use serde::de::{
    DeserializeSeed, Deserializer, Error as _, IgnoredAny, MapAccess, SeqAccess, Visitor,
};
use serde_json::value::RawValue;

use crate::model::{Reason, Time, Value, ValueError};
use crate::settings::{JsonPointers, TimeForm};

use super::number::shown;
use super::{Decoded, Fault, times};

/// Decodes a document by its pointers.
pub(super) fn decode<'a>(
    pointers: &JsonPointers,
    text: &'a str,
    topic_source: Option<&'a str>,
) -> Result<Decoded<'a>, Fault> {
    let document = document(text)?;
    let source = match (topic_source, &pointers.source) {
        (None, Some(pointer)) => source(required(document, pointer, "source")?)?,
        (topic, _) => super::source_of_topic(topic)?,
    };
    let value = value(required(document, &pointers.value, "value")?)?;
    let taken = match &pointers.time {
        Some(pointer) => Some(time(
            required(document, pointer, "time")?,
            pointers.time_form,
        )?),
        None => None,
    };
    let cycle = match &pointers.cycle {
        Some(pointer) => Some(cycle(required(document, pointer, "cycle")?)?),
        None => None,
    };
    Ok(Decoded {
        source,
        value,
        taken,
        cycle,
    })
}

/// The text as one JSON document, checked from end to end.
pub(in crate::intake) fn document(text: &str) -> Result<&RawValue, Fault> {
    if text.trim().is_empty() {
        return Err(Fault::new(Reason::Empty, "the payload has only blanks"));
    }
    serde_json::from_str(text).map_err(|error| malformed(text, &error))
}

/// Where `pointer` leads; `None` when it leads nowhere or to `null`.
pub(in crate::intake) fn find<'a>(
    document: &'a RawValue,
    pointer: &str,
) -> Result<Option<&'a RawValue>, Fault> {
    let mut at = document;
    for token in pointer.split('/').skip(1) {
        let token = if token.contains('~') {
            Cow::Owned(token.replace("~1", "/").replace("~0", "~"))
        } else {
            Cow::Borrowed(token)
        };
        match step(at, &token) {
            Ok(Some(next)) => at = next,
            Ok(None) => return Ok(None),
            Err(error) => return Err(malformed(at.get(), &error)),
        }
    }
    Ok((at.get() != "null").then_some(at))
}

fn required<'a>(document: &'a RawValue, pointer: &str, what: &str) -> Result<&'a RawValue, Fault> {
    find(document, pointer)?.ok_or_else(|| {
        let detail = format!("there is no {what} at {pointer}");
        Fault::new(Reason::FieldMissing, detail)
    })
}

/// The value: a JSON number.
pub(in crate::intake) fn value(raw: &RawValue) -> Result<Value, Fault> {
    let refuse = |why: String| Err(Fault::new(Reason::NotANumber, why));
    match Kind::of(raw) {
        Kind::Number(text) => Value::parse(text).map_err(|error| {
            let reason = match error {
                ValueError::NotFinite => Reason::NotFinite,
                ValueError::Empty | ValueError::NotANumber => Reason::NotANumber,
            };
            Fault::new(reason, format!("the value {} {error}", shown(text)))
        }),
        Kind::Text(text) if Value::parse(&text).is_ok() => refuse(format!(
            "the value {} is a number written as text, send it without quotation marks",
            shown(&text)
        )),
        Kind::Text(text) => refuse(format!("the value is the text {}", shown(&text))),
        Kind::Other(what) => refuse(format!("the value is {what}")),
    }
}

/// The source: text or a whole number.
pub(in crate::intake) fn source(raw: &RawValue) -> Result<Cow<'_, str>, Fault> {
    let refuse = |what: &str| {
        let detail = format!("the source is {what}, not text or a whole number");
        Err(Fault::new(Reason::UnknownSource, detail))
    };
    match Kind::of(raw) {
        Kind::Text(text) => Ok(text),
        Kind::Number(text) if text.bytes().all(|b| b.is_ascii_digit() || b == b'-') => {
            Ok(Cow::Borrowed(text))
        }
        Kind::Number(text) => refuse(&shown(text)),
        Kind::Other(what) => refuse(what),
    }
}

/// The time taken.
pub(in crate::intake) fn time(raw: &RawValue, form: TimeForm) -> Result<Time, Fault> {
    match Kind::of(raw) {
        Kind::Text(text) => times::from_text(&text, form),
        Kind::Number(text) => times::from_number(text, form),
        Kind::Other(what) => Err(Fault::new(Reason::BadTime, format!("the time is {what}"))),
    }
}

/// The cycle: a whole number, however it is written.
pub(in crate::intake) fn cycle(raw: &RawValue) -> Result<i64, Fault> {
    match Kind::of(raw) {
        Kind::Number(text) => whole(text),
        Kind::Text(text) => Err(bad_cycle(format!("the cycle {} is text", shown(&text)))),
        Kind::Other(what) => Err(bad_cycle(format!("the cycle is {what}"))),
    }
}

/// A whole number from decimal text. `12.0` and `1.2e1` are accepted, because some senders know
/// only doubles; `12.5` is not.
pub(in crate::intake) fn whole(text: &str) -> Result<i64, Fault> {
    let text = text.trim();
    if let Ok(whole) = text.parse() {
        return Ok(whole);
    }
    let not_whole = || bad_cycle(format!("the cycle {} is no whole number", shown(text)));
    match Value::parse(text) {
        Ok(Value::Decimal {
            coefficient,
            exponent,
        }) => {
            let ten = 10_i64.checked_pow(u32::from(exponent.unsigned_abs()));
            let whole = match (coefficient, ten) {
                (0, _) => Some(0),
                (_, None) => None,
                (c, Some(ten)) if exponent >= 0 => c.checked_mul(ten),
                (c, Some(ten)) => (c % ten == 0).then_some(c / ten),
            };
            whole.ok_or_else(not_whole)
        }
        _ => Err(not_whole()),
    }
}

fn bad_cycle(detail: String) -> Fault {
    Fault::new(Reason::BadCycle, detail)
}

/// What stands at a place of a document.
enum Kind<'a> {
    Number(&'a str),
    Text(Cow<'a, str>),
    Other(&'static str),
}

impl<'a> Kind<'a> {
    fn of(raw: &'a RawValue) -> Self {
        let text = raw.get();
        match text.as_bytes().first() {
            Some(b'-' | b'0'..=b'9') => Self::Number(text),
            Some(b'"') => match raw.deserialize_str(TextVisitor) {
                Ok(text) => Self::Text(text),
                Err(_) => Self::Other("text with broken escapes"),
            },
            Some(b'{') => Self::Other("an object"),
            Some(b'[') => Self::Other("a list"),
            Some(b't') => Self::Other("true"),
            Some(b'f') => Self::Other("false"),
            _ => Self::Other("null"),
        }
    }
}

/// Text, borrowed where it has no escapes.
struct TextVisitor;

impl<'de> Visitor<'de> for TextVisitor {
    type Value = Cow<'de, str>;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("text")
    }

    fn visit_borrowed_str<E>(self, text: &'de str) -> Result<Self::Value, E> {
        Ok(Cow::Borrowed(text))
    }

    fn visit_str<E>(self, text: &str) -> Result<Self::Value, E> {
        Ok(Cow::Owned(text.to_owned()))
    }
}

/// One step of a pointer.
fn step<'a>(at: &'a RawValue, token: &str) -> Result<Option<&'a RawValue>, serde_json::Error> {
    match at.get().as_bytes().first() {
        Some(b'{' | b'[') => at.deserialize_any(Step(token)),
        _ => Ok(None),
    }
}

/// Finds the member or element that a token of a pointer names.
struct Step<'t>(&'t str);

impl<'de> Visitor<'de> for Step<'_> {
    type Value = Option<&'de RawValue>;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("an object or a list")
    }

    fn visit_map<M: MapAccess<'de>>(self, mut map: M) -> Result<Self::Value, M::Error> {
        let mut found = None;
        while let Some(is_it) = map.next_key_seed(KeyIs(self.0))? {
            if !is_it {
                map.next_value::<IgnoredAny>()?;
            } else if found.replace(map.next_value()?).is_some() {
                let words = format!("the name {} stands twice in one object", shown(self.0));
                return Err(M::Error::custom(words));
            }
        }
        Ok(found)
    }

    fn visit_seq<S: SeqAccess<'de>>(self, mut list: S) -> Result<Self::Value, S::Error> {
        let mut found = None;
        let mut at = 0;
        let wanted = index(self.0);
        loop {
            if wanted == Some(at) {
                found = list.next_element()?;
                if found.is_none() {
                    return Ok(None);
                }
            } else if list.next_element::<IgnoredAny>()?.is_none() {
                return Ok(found);
            }
            at += 1;
        }
    }
}

/// An array index by RFC 6901 §4: digits without leading zeros.
fn index(token: &str) -> Option<usize> {
    let digits = token.bytes().all(|b| b.is_ascii_digit());
    let leading_zero = token.len() > 1 && token.starts_with('0');
    (digits && !leading_zero)
        .then(|| token.parse().ok())
        .flatten()
}

/// Whether a member's name is this one.
struct KeyIs<'t>(&'t str);

impl<'de> DeserializeSeed<'de> for KeyIs<'_> {
    type Value = bool;

    fn deserialize<D: Deserializer<'de>>(self, deserializer: D) -> Result<bool, D::Error> {
        deserializer.deserialize_str(self)
    }
}

impl Visitor<'_> for KeyIs<'_> {
    type Value = bool;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("a name")
    }

    fn visit_str<E>(self, text: &str) -> Result<bool, E> {
        Ok(text == self.0)
    }
}

/// Why the text is no JSON. NaN and infinities, which JSON cannot write but some senders do,
/// get their own reason.
fn malformed(text: &str, error: &serde_json::Error) -> Fault {
    let line_start: usize = text
        .split_inclusive('\n')
        .take(error.line().saturating_sub(1))
        .map(str::len)
        .sum();
    let at = line_start + error.column();
    for start in [at.saturating_sub(1), at] {
        let rest = text.get(start..).unwrap_or("");
        if ["NaN", "Infinity", "nan", "inf"]
            .iter()
            .any(|word| rest.starts_with(word))
        {
            let detail = "NaN and infinities are no measurements, and JSON cannot write them";
            return Fault::new(Reason::NotFinite, detail);
        }
    }
    Fault::new(
        Reason::Malformed,
        format!("the payload is not valid JSON: {error}"),
    )
}
