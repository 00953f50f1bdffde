//! Payload decoders: bytes -> values, sources, times taken and cycles, or the reasons why not.
//!
//! Owns the forms a payload may have, one file each, and what is believed of a value
//! ([`belief`]). What must hold: no bytes panic, memory stays within a small multiple of the payload,
//! digits are never lost on the way to [`Value`], and one bad item costs no other item of its message.
//! Deliberately absent: whether a time is plausible, a source known or a value a double; the engine
//! judges that.

mod belief;
mod csv;
mod excerpt;
pub(super) mod json;
mod json_form;
pub(super) mod number;
mod opc_ua;
mod senml;
pub mod sparkplug;
pub(super) mod times;

use std::borrow::Cow;

use crate::model::{Reason, Time, Value};
use crate::settings::PayloadForm;

pub use belief::believed;
pub use excerpt::{MOST_EXCERPT, excerpt};

/// Longest name of a source, in bytes. Names are kept, shown in tables and used as labels of
/// metrics; nobody writes a longer one on a machine.
pub const MOST_SOURCE_BYTES: usize = 200;

/// Most measurements in one message: a hundred cycles of a hundred sources. Each may become a refusal
/// with its words, and those must not fill the memory.
pub const MOST_ITEMS: usize = 10_000;

/// What a payload says of one measurement.
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

/// What a payload became, item by item. Empty for a well-formed message that is no measurement by
/// its own standard (a keep-alive, say).
pub type Decodings<'a> = Vec<Result<Decoded<'a>, Fault>>;

/// A message to decode.
#[derive(Clone, Copy, Debug)]
pub struct Message<'a> {
    /// Its bytes.
    pub payload: &'a [u8],
    /// The source that the topic names. It goes before one in the payload.
    pub topic_source: Option<&'a str>,
    /// The time at which it arrived, for forms that tell times as so long ago.
    pub now: Time,
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

    /// The same fault, said of one item of a message.
    #[must_use]
    fn within(self, item: impl std::fmt::Display) -> Self {
        let detail = format!("{item}: {}", self.detail);
        Self { detail, ..self }
    }

    /// The same fault, said of a source's value.
    #[must_use]
    pub fn of_source(self, source: &str) -> Self {
        self.within(format_args!("source {}", number::shown(source)))
    }
}

/// Reads the payloads of one feed. Keeps what a form's later messages take for known.
#[derive(Clone, Debug)]
pub struct Reader {
    form: PayloadForm,
    most_bytes: usize,
    writers: opc_ua::Writers,
}

impl Reader {
    /// For payloads of this form; one larger than `most_bytes` is refused.
    pub fn new(form: PayloadForm, most_bytes: usize) -> Self {
        Self {
            form,
            most_bytes,
            writers: opc_ua::Writers::default(),
        }
    }

    /// Decodes a message. A message that is wrong as a whole is one [`Fault`].
    pub fn read<'a>(&'a mut self, message: Message<'a>) -> Decodings<'a> {
        let most = self.most_bytes;
        let mut all = match decode(&self.form, &mut self.writers, message, most) {
            Ok(all) => all,
            Err(fault) => vec![Err(fault)],
        };
        for one in &mut all {
            let checked = one
                .as_ref()
                .map_or(Ok(()), |one| checked_source(&one.source));
            if let Err(fault) = checked {
                *one = Err(fault);
            }
        }
        all
    }
}

fn decode<'a>(
    form: &'a PayloadForm,
    writers: &mut opc_ua::Writers,
    message: Message<'a>,
    most_bytes: usize,
) -> Result<Decodings<'a>, Fault> {
    let Message {
        payload,
        topic_source,
        now,
    } = message;
    let text = text_of(payload, most_bytes)?;
    match form {
        PayloadForm::Number => Ok(vec![Ok(Decoded {
            source: source_of_topic(topic_source)?,
            value: number::value(text)?,
            taken: None,
            cycle: None,
        })]),
        PayloadForm::Json(form) => json_form::decode(form, text, topic_source),
        PayloadForm::Csv(form) => csv::decode(form, text, topic_source),
        PayloadForm::OpcUaJson(form) => opc_ua::decode(form, writers, text, topic_source),
        PayloadForm::SenMl(form) => senml::decode(form, text, topic_source, now),
        // Sparkplug's messages say nothing without those before them: a session reads them.
        PayloadForm::Sparkplug(_) => Err(Fault::new(
            Reason::NoBank,
            "this is no topic of Sparkplug B",
        )),
    }
}

/// Refuses a value whose unit is not the one that is expected.
fn same_unit(said: &str, wanted: &str) -> Result<(), Fault> {
    if said == wanted {
        return Ok(());
    }
    let said = number::shown(said);
    let detail = format!("the unit is {said}, and '{wanted}' is expected; nothing is converted");
    Err(Fault::new(Reason::WrongUnit, detail))
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
