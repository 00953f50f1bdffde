//! The form `number`: the whole text is one decimal number.
//!
//! Also reads the cells of recordings, which are the same thing. Deliberately absent: decimal
//! commas, thousands separators and units; a guess about them would sooner or later be wrong.

use crate::model::{Reason, Value, ValueError};

use super::{Fault, excerpt};

/// The number that the text is.
pub(in crate::intake) fn value(text: &str) -> Result<Value, Fault> {
    Value::parse(text).map_err(|error| match error {
        ValueError::Empty => Fault::new(Reason::Empty, "only blanks where a number should be"),
        ValueError::NotFinite => Fault::new(
            Reason::NotFinite,
            format!("{} is not a finite number", shown(text)),
        ),
        ValueError::NotANumber => Fault::new(
            Reason::NotANumber,
            format!("{} is no number{}", shown(text), hint(text.trim())),
        ),
    })
}

/// What is most likely meant.
fn hint(text: &str) -> &'static str {
    let is_number = |text: &str| Value::parse(text).is_ok();
    let inner = text.trim_matches(['"', '\'']);
    if inner.len() < text.len() && is_number(inner) {
        "; send it without quotation marks"
    } else if text.matches(',').count() == 1 && is_number(&text.replace(',', ".")) {
        "; write a decimal point, not a comma"
    } else if text.starts_with('{') {
        "; it looks like JSON, then set payload = { form = \"json\", value = \"/...\" }"
    } else {
        ""
    }
}

/// The text itself when it is short.
pub(super) fn shown(text: &str) -> String {
    const SHORT: usize = 40;
    let text = text.trim();
    if text.chars().nth(SHORT).is_none() {
        format!("'{}'", excerpt(text.as_bytes()))
    } else {
        "the text".to_owned()
    }
}
