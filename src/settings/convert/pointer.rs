//! Addresses within a payload: pointers of RFC 6901, and columns by number or word.
//!
//! Each reader answers `None` when the key is faulty and `Some(None)` when it is absent.

use crate::settings::check::{Check, unfit};
use crate::settings::keys;
use crate::settings::raw::{Kind, Node};
use crate::settings::section::{Field, Spot};
use crate::settings::written_payload::WrittenAt;

/// More columns than a line of a machine has.
const MOST_COLUMNS: i64 = 1000;

/// A pointer of RFC 6901.
pub(super) fn pointer(
    field: Field<WrittenAt>,
    name: &str,
    check: &mut Check<'_>,
) -> Option<Option<String>> {
    let Spot { value, place } = match field {
        Field::Given(spot) => spot,
        Field::Absent => return Some(None),
        Field::Faulty => return None,
    };
    let value = match value {
        WrittenAt::Text(text) => text,
        WrittenAt::Column(number) => {
            let message = format!("the pointer `{name}` is a number and must be text in quotes");
            let hint = format!("write `{name} = \"/{number}\"` for the element of a list");
            check.add(&place, message, hint);
            return None;
        }
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

/// A column, counted from 0.
pub(super) fn column(
    field: Field<WrittenAt>,
    name: &str,
    header: &[String],
    check: &mut Check<'_>,
) -> Option<Option<usize>> {
    let Spot { value, place } = match field {
        Field::Given(spot) => spot,
        Field::Absent => return Some(None),
        Field::Faulty => return None,
    };
    let last = match header.len() {
        0 => MOST_COLUMNS,
        words => i64::try_from(words).unwrap_or(MOST_COLUMNS),
    };
    let found = match &value {
        WrittenAt::Text(word) => header.iter().position(|own| own == word),
        WrittenAt::Column(number) if (1..=last).contains(number) => {
            usize::try_from(number - 1).ok()
        }
        WrittenAt::Column(_) => None,
    };
    if found.is_some() {
        return Some(found);
    }
    let (message, hint) = match value {
        WrittenAt::Text(word) if header.is_empty() => (
            format!(
                "`{name}` is the word \"{}\", and no `header` is given",
                word.escape_debug()
            ),
            "write the number of the column, from 1, or the words of all columns as `header`"
                .to_owned(),
        ),
        WrittenAt::Text(word) => (
            format!(
                "`{name}` is \"{}\", which is none of `header`",
                word.escape_debug()
            ),
            format!("the words are {}", header.join(", ")),
        ),
        WrittenAt::Column(_) => (
            format!("`{name}` must lie between 1 and {last}"),
            "columns are counted from 1".to_owned(),
        ),
    };
    check.add(&place, message, hint);
    None
}

/// A list of words, each there once; `None` when one is faulty.
pub(super) fn words(
    field: Field<Vec<Node>>,
    name: &str,
    check: &mut Check<'_>,
) -> Option<Vec<String>> {
    let list = match field {
        Field::Given(spot) => spot.value,
        Field::Absent => return Some(Vec::new()),
        Field::Faulty => return None,
    };
    let mut all: Vec<String> = Vec::with_capacity(list.len());
    let mut good = true;
    for node in list {
        let wrong = match node.kind {
            Kind::Text(word) => {
                let twice = all.contains(&word).then(|| "is there twice".to_owned());
                let wrong = unfit(&word).or(twice);
                all.push(word);
                wrong
            }
            other => Some(format!("is {} and must be text in quotes", other.what())),
        };
        if let Some(what) = wrong {
            good = false;
            let message = format!("a word of `{name}` {what}");
            check.add(&node.place, message, keys::example("bank.payload", name));
        }
    }
    good.then_some(all)
}
