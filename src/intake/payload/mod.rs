//! Payload decoders: bytes -> value, source, time taken and cycle, or the reason why not.
//!
//! Owns the forms a payload may have, one file each. What must hold: no bytes panic, nothing grows
//! beyond the size of the payload, digits are never lost on the way to [`Value`]. Deliberately
//! absent: whether a time is plausible, a source known or a value a double; the engine judges that.

mod excerpt;
pub(super) mod json;
pub(super) mod number;
pub(super) mod times;

use std::borrow::Cow;

use crate::model::{Reason, Time, Value};
use crate::settings::PayloadForm;

pub use excerpt::{MOST_EXCERPT, excerpt};

/// Longest name of a source, in bytes. Names are kept, shown in tables and used as labels of
/// metrics; nobody writes a longer one on a machine.
pub const MOST_SOURCE_BYTES: usize = 200;

/// What a payload says.
#[derive(Clone, Debug, PartialEq)]
pub struct Decoded<'a> {
    /// The source, from the topic or from the payload.
    pub source: Cow<'a, str>,
    /// The value.
    pub value: Value,
    /// When it was taken, where the payload says so.
    pub taken: Option<Time>,
    /// The cycle, where the payload carries one.
    pub cycle: Option<i64>,
}

/// Why a payload is no measurement.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("{detail}")]
pub struct Fault {
    /// The reason it is counted under.
    pub reason: Reason,
    /// What exactly is wrong and what to do, in a sentence without a full stop.
    pub detail: String,
}

impl Fault {
    /// A fault of this reason with these words.
    pub fn new(reason: Reason, detail: impl Into<String>) -> Self {
        let detail = detail.into();
        Self { reason, detail }
    }
}

/// Decodes a payload of the configured form. The source in the topic wins over one in the payload.
///
/// # Errors
/// [`Fault`] with the reason and the words for it.
pub fn decode<'a>(
    form: &PayloadForm,
    payload: &'a [u8],
    topic_source: Option<&'a str>,
    most_bytes: usize,
) -> Result<Decoded<'a>, Fault> {
    let text = text_of(payload, most_bytes)?;
    let decoded = match form {
        PayloadForm::Number => Decoded {
            source: source_of_topic(topic_source)?,
            value: number::value(text)?,
            taken: None,
            cycle: None,
        },
        PayloadForm::Json(pointers) => json::decode(pointers, text, topic_source)?,
    };
    checked_source(&decoded.source)?;
    Ok(decoded)
}

/// The payload as text, when it has a sensible size.
fn text_of(payload: &[u8], most_bytes: usize) -> Result<&str, Fault> {
    if payload.is_empty() {
        return Err(Fault::new(Reason::Empty, "the payload has no bytes"));
    }
    if payload.len() > most_bytes {
        let detail = format!(
            "the payload has {} bytes, the limit is {most_bytes}",
            payload.len()
        );
        return Err(Fault::new(Reason::TooLarge, detail));
    }
    std::str::from_utf8(payload).map_err(|error| {
        let at = error.valid_up_to() + 1;
        Fault::new(
            Reason::Malformed,
            format!("the payload is not UTF-8 text from byte {at} on"),
        )
    })
}

/// The source where only the topic can name it.
fn source_of_topic(topic_source: Option<&str>) -> Result<Cow<'_, str>, Fault> {
    topic_source.map(Cow::Borrowed).ok_or_else(|| {
        Fault::new(
            Reason::FieldMissing,
            "neither the topic nor the payload names the source; write {source} in the topic",
        )
    })
}

/// Holds a source's name to what can be kept and shown.
pub(super) fn checked_source(source: &str) -> Result<(), Fault> {
    if source.trim().is_empty() {
        let detail = "the name of the source is empty";
        return Err(Fault::new(Reason::FieldMissing, detail));
    }
    if source.len() > MOST_SOURCE_BYTES {
        let detail = format!(
            "the name of the source has {} bytes, the limit is {MOST_SOURCE_BYTES}",
            source.len()
        );
        return Err(Fault::new(Reason::UnknownSource, detail));
    }
    if source.chars().any(char::is_control) {
        let detail = "the name of the source contains control characters";
        return Err(Fault::new(Reason::UnknownSource, detail));
    }
    Ok(())
}

#[cfg(test)]
mod tests;
