//! The second layer: variables such as `EVENROW__BROKER__URL` laid over the file.
//!
//! What must hold: a fault of such a value is named by its variable. Only single values can be set;
//! lists and banks stand in the file, where their order can be seen.

use config::{Environment, Source};

use super::fault::{FaultList, Place};
use super::raw::{Entry, Kind, Node, Table};

/// What a variable's name starts with.
const PREFIX: &str = "EVENROW";
/// What stands between the parts of a variable's name.
const BETWEEN: &str = "__";

/// The process's variables of this program. Bytes that are no text become U+FFFD, which is a fault
/// when the variable is laid over a configuration.
pub fn environment() -> Vec<(String, String)> {
    let start = format!("{PREFIX}{BETWEEN}");
    let ours = |name: &str| {
        let first = name.get(..start.len());
        first.is_some_and(|first| first.eq_ignore_ascii_case(&start))
    };
    std::env::vars_os()
        .map(|(name, value)| {
            let text = |os: std::ffi::OsString| os.to_string_lossy().into_owned();
            (text(name), text(value))
        })
        .filter(|(name, _)| ours(name))
        .collect()
}

/// Lays the variables over the tree.
pub(super) fn lay_over(
    root: &mut Node,
    variables: impl IntoIterator<Item = (String, String)>,
    faults: &mut FaultList,
) {
    let mut sorted: Vec<_> = variables.into_iter().collect();
    sorted.sort();
    for (name, value) in sorted {
        let place = Place::Variable(name.clone());
        if let Some(path) = path(&name, &value, &place, faults) {
            set(root, &path, "", value, &place, faults);
        }
    }
}

/// The keys that lead to the variable's value; `None` when the variable is not for us or faulty.
fn path(name: &str, value: &str, place: &Place, faults: &mut FaultList) -> Option<Vec<String>> {
    // One variable at a time, so that its own name stays with what is read from it.
    let one = std::iter::once((name.to_owned(), value.to_owned())).collect();
    let layer = Environment::with_prefix(PREFIX)
        .prefix_separator(BETWEEN)
        .separator(BETWEEN)
        .source(Some(one))
        .collect();
    let (key, _) = layer.ok()?.into_iter().next()?;
    if value.contains(char::REPLACEMENT_CHARACTER) {
        return faults.none(place, "the value is not UTF-8 text", "write it in UTF-8");
    }
    let path: Vec<String> = key.split('.').map(str::to_owned).collect();
    if path.iter().any(String::is_empty) {
        let hint = "write EVENROW__, the section, __ and the key: EVENROW__BROKER__URL";
        return faults.none(place, "the name leads to no key", hint);
    }
    Some(path)
}

/// Puts the value where the path leads, making tables on the way; `passed` is the key before.
fn set(
    here: &mut Node,
    path: &[String],
    passed: &str,
    text: String,
    place: &Place,
    faults: &mut FaultList,
) {
    match (&mut here.kind, path) {
        (_, []) => {}
        (Kind::Table(table), [key]) => put(table, key, text, place, faults),
        (Kind::Table(table), [key, rest @ ..]) => {
            let next = table.entry(key.clone()).or_insert_with(|| made(place));
            set(&mut next.node, rest, key, text, place, faults);
        }
        (Kind::List(_), _) => faults.add(
            place,
            format!("`{passed}` is a list, which no variable can change"),
            "change it in the file",
        ),
        (_, _) => faults.add(
            place,
            format!("`{passed}` has no keys of its own"),
            "take the variable away",
        ),
    }
}

fn made(place: &Place) -> Entry {
    Entry {
        key: place.clone(),
        node: Node {
            place: place.clone(),
            kind: Kind::Table(Table::new()),
        },
    }
}

fn put(table: &mut Table, key: &str, text: String, place: &Place, faults: &mut FaultList) {
    if let Some(Place::Variable(other)) = table.get(key).map(|entry| &entry.node.place) {
        let message = format!("{other} sets the same key");
        faults.add(place, message, "take one of the two away");
        return;
    }
    let node = Node {
        place: place.clone(),
        kind: Kind::Variable(text),
    };
    let key_place = place.clone();
    table.insert(
        key.to_owned(),
        Entry {
            key: key_place,
            node,
        },
    );
}
