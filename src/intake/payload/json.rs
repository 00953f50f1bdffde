//! JSON documents: pointers (RFC 6901), members and elements, and what stands where they lead.
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
use crate::settings::TimeForm;

use super::number::shown;
use super::{Fault, MOST_ITEMS, times};

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
        match step(at, &unescaped(token)) {
            Ok(Some(next)) => at = next,
            Ok(None) => return Ok(None),
            Err(error) => return Err(malformed(at.get(), &error)),
        }
    }
    Ok((at.get() != "null").then_some(at))
}

/// A token of a pointer as the name that it means (RFC 6901 §4).
pub(super) fn unescaped(token: &str) -> Cow<'_, str> {
    if token.contains('~') {
        Cow::Owned(token.replace("~1", "/").replace("~0", "~"))
    } else {
        Cow::Borrowed(token)
    }
}

/// Where `pointer` leads; a fault that calls it `what` when it leads nowhere.
pub(super) fn required<'a>(
    document: &'a RawValue,
    pointer: &str,
    what: &str,
) -> Result<&'a RawValue, Fault> {
    find(document, pointer)?.ok_or_else(|| {
        let place = match pointer {
            "" => "where one should stand".to_owned(),
            pointer => format!("at {pointer}"),
        };
        Fault::new(Reason::FieldMissing, format!("there is no {what} {place}"))
    })
}

/// The elements of a list.
pub(super) fn elements(list: &RawValue) -> Result<Vec<&RawValue>, Fault> {
    list.deserialize_seq(Elements)
        .map_err(|error| malformed(list.get(), &error))
}

/// The members of an object, in the order in which they are written.
pub(super) fn members(object: &RawValue) -> Result<Vec<(Cow<'_, str>, &RawValue)>, Fault> {
    object
        .deserialize_map(Members)
        .map_err(|error| malformed(object.get(), &error))
}

/// Text, `None` when something else stands there.
pub(super) fn text(raw: &RawValue) -> Option<Cow<'_, str>> {
    match Kind::of(raw) {
        Kind::Text(text) => Some(text),
        Kind::Number(_) | Kind::Other(_) => None,
    }
}

/// The text of a number, `None` when something else stands there.
pub(super) fn digits(raw: &RawValue) -> Option<&str> {
    match Kind::of(raw) {
        Kind::Number(text) => Some(text),
        Kind::Text(_) | Kind::Other(_) => None,
    }
}

/// Whether an object stands there.
pub(super) fn is_object(raw: &RawValue) -> bool {
    raw.get().starts_with('{')
}

/// Whether a list stands there.
pub(super) fn is_list(raw: &RawValue) -> bool {
    raw.get().starts_with('[')
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
pub(in crate::intake) fn time(raw: &RawValue, form: &TimeForm) -> Result<Time, Fault> {
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

/// Takes the elements of a list, up to a bound.
struct Elements;

impl<'de> Visitor<'de> for Elements {
    type Value = Vec<&'de RawValue>;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("a list")
    }

    fn visit_seq<S: SeqAccess<'de>>(self, mut list: S) -> Result<Self::Value, S::Error> {
        let mut all = Vec::new();
        while let Some(element) = list.next_element()? {
            if all.len() == MOST_ITEMS {
                return Err(S::Error::custom(too_many()));
            }
            all.push(element);
        }
        Ok(all)
    }
}

/// Takes the members of an object, up to a bound.
struct Members;

impl<'de> Visitor<'de> for Members {
    type Value = Vec<(Cow<'de, str>, &'de RawValue)>;

    fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("an object")
    }

    fn visit_map<M: MapAccess<'de>>(self, mut map: M) -> Result<Self::Value, M::Error> {
        let mut all: Self::Value = Vec::new();
        while let Some(name) = map.next_key_seed(TextSeed)? {
            if all.len() == MOST_ITEMS {
                return Err(M::Error::custom(too_many()));
            }
            all.push((name, map.next_value()?));
        }
        let mut names: Vec<&str> = all.iter().map(|(name, _)| name.as_ref()).collect();
        names.sort_unstable();
        if let Some(twice) = names.windows(2).find(|pair| pair[0] == pair[1]) {
            let words = format!("the name {} stands twice in one object", shown(twice[0]));
            return Err(M::Error::custom(words));
        }
        Ok(all)
    }
}

fn too_many() -> String {
    format!("it holds more than {MOST_ITEMS} items, send them in several messages")
}

/// Reads a member's name as text.
struct TextSeed;

impl<'de> DeserializeSeed<'de> for TextSeed {
    type Value = Cow<'de, str>;

    fn deserialize<D: Deserializer<'de>>(self, deserializer: D) -> Result<Self::Value, D::Error> {
        deserializer.deserialize_str(TextVisitor)
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
