//! The configuration as a tree in which every key and value knows its place.
//!
//! Both layers have this form: the file's text, and the environment laid over it. Nothing is
//! converted here, and text from the environment stays apart from text in the file: a variable can
//! only be text, so what it means depends on the key, while `port = "1883"` in a file is a fault.

use std::collections::BTreeMap;
use std::ops::Range;

use toml::Spanned;
use toml::de::{DeInteger, DeTable, DeValue};

use super::fault::{FaultList, Place};

/// A value and where it stands.
#[derive(Clone, Debug)]
pub(super) struct Node {
    pub(super) place: Place,
    pub(super) kind: Kind,
}

/// What a value is.
#[derive(Clone, Debug)]
pub(super) enum Kind {
    Text(String),
    /// A whole number; `None` beyond 64 bits.
    Whole(Option<i64>),
    /// A number with a point or an exponent, as written.
    Number(String),
    Flag(bool),
    Moment,
    List(Vec<Node>),
    Table(Table),
    /// The text of an environment variable.
    Variable(String),
}

/// Keys with their values.
pub(super) type Table = BTreeMap<String, Entry>;

/// A key's place and its value.
#[derive(Clone, Debug)]
pub(super) struct Entry {
    pub(super) key: Place,
    pub(super) node: Node,
}

impl Kind {
    /// What it is, for messages.
    pub(super) fn what(&self) -> &'static str {
        match self {
            Self::Text(_) => "text",
            Self::Whole(Some(_)) => "a whole number",
            Self::Whole(None) => "a number too large to read",
            Self::Number(_) => "a number",
            Self::Flag(_) => "true or false",
            Self::Moment => "a date or time",
            Self::List(_) => "a list",
            Self::Table(_) => "a table",
            Self::Variable(_) => "text from the environment",
        }
    }
}

/// Finds lines and columns of bytes.
pub(super) struct Lines<'t> {
    text: &'t str,
    starts: Vec<usize>,
}

impl<'t> Lines<'t> {
    pub(super) fn new(text: &'t str) -> Self {
        let after_breaks = text.match_indices('\n').map(|(at, _)| at + 1);
        Self {
            text,
            starts: std::iter::once(0).chain(after_breaks).collect(),
        }
    }

    /// The place of these bytes.
    pub(super) fn place(&self, range: Range<usize>) -> Place {
        let line = self.starts.partition_point(|&start| start <= range.start);
        let start = self
            .starts
            .get(line.saturating_sub(1))
            .copied()
            .unwrap_or(0);
        let before = self.text.get(start..range.start).unwrap_or_default();
        Place::Span {
            line,
            column: before.chars().count() + 1,
            range,
        }
    }
}

/// Reads the file's text. Text that is no TOML gives faults and no tree: what the parser makes of
/// the rest of it would be guesses.
pub(super) fn from_text(text: &str, faults: &mut FaultList) -> Option<Node> {
    let lines = Lines::new(text);
    let (root, errors) = DeTable::parse_recoverable(text);
    for error in &errors {
        let place = error.span().map_or(Place::File, |span| lines.place(span));
        faults.add(
            &place,
            format!("this is not TOML: {}", error.message()),
            "put this right first; the keys and values are checked after that",
        );
    }
    if !errors.is_empty() {
        return None;
    }
    Some(Node {
        place: Place::File,
        kind: Kind::Table(table(root.into_inner(), &lines)),
    })
}

fn table(table: DeTable<'_>, lines: &Lines<'_>) -> Table {
    let entry = |(key, value): (Spanned<_>, Spanned<DeValue<'_>>)| {
        let place = lines.place(key.span());
        let name: std::borrow::Cow<'_, str> = key.into_inner();
        let node = node(value, lines);
        (name.into_owned(), Entry { key: place, node })
    };
    table.into_iter().map(entry).collect()
}

fn node(value: Spanned<DeValue<'_>>, lines: &Lines<'_>) -> Node {
    let place = lines.place(value.span());
    let kind = match value.into_inner() {
        DeValue::String(text) => Kind::Text(text.into_owned()),
        DeValue::Integer(number) => Kind::Whole(whole(&number)),
        DeValue::Float(number) => Kind::Number(number.as_str().to_owned()),
        DeValue::Boolean(flag) => Kind::Flag(flag),
        DeValue::Datetime(_) => Kind::Moment,
        DeValue::Array(list) => Kind::List(list.into_iter().map(|v| node(v, lines)).collect()),
        DeValue::Table(inner) => Kind::Table(table(inner, lines)),
    };
    Node { place, kind }
}

fn whole(number: &DeInteger<'_>) -> Option<i64> {
    i64::from_str_radix(number.as_str(), number.radix()).ok()
}
