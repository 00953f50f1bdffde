//! A section while it is being read: keys are taken out one by one, each converted on its own, and
//! what is left over at the end is unknown.
//!
//! What must hold: no type is coerced; a value that is there and wrong is not also missing.

use super::fault::{FaultList, Place};
use super::keys::{self, LATER, OTHERWISE};
use super::raw::{Kind, Node, Table};

/// A good value and where it stands.
#[derive(Clone, Debug)]
pub(super) struct Spot<T> {
    pub(super) value: T,
    pub(super) place: Place,
}

/// What became of a key.
#[derive(Clone, Debug, Default)]
pub(super) enum Field<T> {
    /// It is not there.
    #[default]
    Absent,
    /// It is there and wrong, which has been said.
    Faulty,
    /// It is there.
    Given(Spot<T>),
}

impl<T> Field<T> {
    /// The value, if it is there and good so far.
    pub(super) fn given(self) -> Option<Spot<T>> {
        match self {
            Self::Given(spot) => Some(spot),
            Self::Absent | Self::Faulty => None,
        }
    }

    /// The value turned into another; its place stays.
    pub(super) fn map<U>(self, how: impl FnOnce(T, &Place) -> U) -> Field<U> {
        match self {
            Self::Given(Spot { value, place }) => Field::Given(Spot {
                value: how(value, &place),
                place,
            }),
            Self::Absent => Field::Absent,
            Self::Faulty => Field::Faulty,
        }
    }

    /// The value and place, to look at.
    pub(super) fn peek(&self) -> Option<&Spot<T>> {
        match self {
            Self::Given(spot) => Some(spot),
            Self::Absent | Self::Faulty => None,
        }
    }
}

/// A table being read.
pub(super) struct Section {
    /// Its path without numbers: `bank.payload`.
    pub(super) path: &'static str,
    /// Its heading.
    pub(super) place: Place,
    /// What is left in it; `None` when the section itself is faulty, and so is every key of it.
    table: Option<Table>,
}

impl Section {
    /// The section of a table.
    pub(super) fn new(path: &'static str, place: Place, table: Table) -> Self {
        Self {
            path,
            place,
            table: Some(table),
        }
    }

    /// A section of which something wrong has been said already.
    pub(super) fn faulty(path: &'static str) -> Self {
        Self {
            path,
            place: Place::File,
            table: None,
        }
    }

    /// Whether a key that a later version brings is there; [`Section::close`] will say so.
    pub(super) fn holds_later(&self) -> bool {
        let names = self.table.iter().flatten().map(|(name, _)| name);
        names
            .into_iter()
            .any(|name| later(self.path, name).is_some())
    }

    /// The value of a key as it stands.
    pub(super) fn node(&mut self, name: &'static str) -> Field<Node> {
        debug_assert!(
            keys::find(self.path, name).is_some(),
            "{}.{name}",
            self.path
        );
        let Some(table) = &mut self.table else {
            return Field::Faulty;
        };
        match table.remove(name) {
            Some(entry) => Field::Given(Spot {
                place: entry.node.place.clone(),
                value: entry.node,
            }),
            None => Field::Absent,
        }
    }

    /// A key whose value may have more than one form: `how` takes the forms it knows.
    pub(super) fn either<T>(
        &mut self,
        name: &'static str,
        wanted: &str,
        faults: &mut FaultList,
        how: impl FnOnce(Kind, &Place, &mut FaultList) -> Result<T, &'static str>,
    ) -> Field<T> {
        let Spot { value: node, place } = match self.node(name) {
            Field::Given(spot) => spot,
            Field::Absent => return Field::Absent,
            Field::Faulty => return Field::Faulty,
        };
        match how(node.kind, &place, faults) {
            Ok(value) => Field::Given(Spot { value, place }),
            Err(what) => {
                let message = format!("`{name}` is {what} and must be {wanted}");
                faults.add(&place, message, keys::example(self.path, name));
                Field::Faulty
            }
        }
    }

    fn convert<T>(
        &mut self,
        name: &'static str,
        wanted: &str,
        faults: &mut FaultList,
        how: impl FnOnce(Kind) -> Result<T, &'static str>,
    ) -> Field<T> {
        self.either(name, wanted, faults, |kind, _, _| how(kind))
    }

    /// Text.
    pub(super) fn text(&mut self, name: &'static str, faults: &mut FaultList) -> Field<String> {
        self.convert(name, "text in quotes", faults, |kind| match kind {
            Kind::Text(text) | Kind::Variable(text) => Ok(text),
            other => Err(other.what()),
        })
    }

    /// A whole number.
    pub(super) fn whole(&mut self, name: &'static str, faults: &mut FaultList) -> Field<i64> {
        self.convert(name, "a whole number", faults, |kind| match kind {
            Kind::Whole(Some(number)) => Ok(number),
            Kind::Variable(text) => text.trim().parse().map_err(|_| "no number"),
            other => Err(other.what()),
        })
    }

    /// A number, as written.
    pub(super) fn number(&mut self, name: &'static str, faults: &mut FaultList) -> Field<String> {
        self.convert(name, "a number without quotes", faults, |kind| match kind {
            Kind::Whole(Some(number)) => Ok(number.to_string()),
            Kind::Number(text) | Kind::Variable(text) => Ok(text),
            other => Err(other.what()),
        })
    }

    /// `true` or `false`.
    pub(super) fn flag(&mut self, name: &'static str, faults: &mut FaultList) -> Field<bool> {
        self.convert(name, "true or false", faults, |kind| match kind {
            Kind::Flag(flag) => Ok(flag),
            Kind::Variable(text) => text.trim().parse().map_err(|_| "neither true nor false"),
            other => Err(other.what()),
        })
    }

    /// A list.
    pub(super) fn list(&mut self, name: &'static str, faults: &mut FaultList) -> Field<Vec<Node>> {
        self.convert(name, "a list", faults, |kind| match kind {
            Kind::List(list) => Ok(list),
            other => Err(other.what()),
        })
    }

    /// A section inside this one.
    pub(super) fn section(
        &mut self,
        name: &'static str,
        path: &'static str,
        faults: &mut FaultList,
    ) -> Field<Section> {
        let field = self.convert(name, "a table", faults, |kind| match kind {
            Kind::Table(table) => Ok(table),
            other => Err(other.what()),
        });
        field.map(|table, place| Self::new(path, place.clone(), table))
    }

    /// The sections of a repeated heading, without those that are no table.
    pub(super) fn sections(
        &mut self,
        name: &'static str,
        path: &'static str,
        faults: &mut FaultList,
    ) -> Field<Vec<Section>> {
        let heading = keys::title(path);
        let field = self.convert(
            name,
            &format!("a list: {heading}"),
            faults,
            |kind| match kind {
                Kind::List(list) => Ok(list),
                Kind::Table(_) => Err("one table"),
                other => Err(other.what()),
            },
        );
        let Field::Given(Spot { value: list, place }) = field else {
            return field.map(|_, _| Vec::new());
        };
        let empty = list.is_empty();
        let section = |node: Node| match node.kind {
            Kind::Table(table) => Some(Self::new(path, node.place, table)),
            other => faults.none(
                &node.place,
                format!("`{name}` holds {} and must hold tables", other.what()),
                format!("write {heading} and the keys under it"),
            ),
        };
        let value: Vec<_> = list.into_iter().filter_map(section).collect();
        if value.is_empty() && !empty {
            return Field::Faulty;
        }
        Field::Given(Spot { value, place })
    }

    /// Says of every key that is left over that there is no such key.
    pub(super) fn close(self, faults: &mut FaultList) {
        for (name, entry) in self.table.iter().flatten() {
            match later(self.path, name) {
                Some(until) => faults.add(
                    &entry.key,
                    format!("`{name}` is not in this version"),
                    format!("take it out; in this version {until}"),
                ),
                None => faults.add(
                    &entry.key,
                    format!(
                        "{} has no key `{}`",
                        keys::title(self.path),
                        name.escape_debug()
                    ),
                    suggestion(self.path, name),
                ),
            }
        }
    }
}

fn later(path: &str, name: &str) -> Option<&'static str> {
    said_of(LATER, path, name)
}

/// What a list says of a key.
fn said_of(list: &[(&str, &str, &'static str)], path: &str, name: &str) -> Option<&'static str> {
    let same = |known: &&(&str, &str, &'static str)| known.0 == path && known.1 == name;
    list.iter().find(same).map(|known| known.2)
}

/// What the key was most likely meant to be.
fn suggestion(path: &str, name: &str) -> String {
    if let Some(form) = said_of(OTHERWISE, path, name) {
        return form.to_owned();
    }
    let elsewhere = keys::KEYS.iter().find(|key| key.name == name);
    match elsewhere {
        Some(key) if key.section.is_empty() => return format!("it is a section: {}", key.example),
        Some(key) => return format!("it belongs in {}", keys::title(key.section)),
        None => {}
    }
    let here = || {
        keys::KEYS
            .iter()
            .filter(|key| key.section == path)
            .map(|key| key.name)
    };
    match keys::nearest(name, here()) {
        Some(near) => format!("did you mean `{near}`? {}", keys::example(path, near)),
        None => format!(
            "the keys here are {}",
            here().collect::<Vec<_>>().join(", ")
        ),
    }
}
