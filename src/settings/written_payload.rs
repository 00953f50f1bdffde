//! `payload` as written: the keys of every form together; which of them mean something is for the
//! conversion to say.

use super::fault::{FaultList, Place};
use super::raw::{Kind, Node};
use super::section::{Field, Section, Spot};

/// `payload`, with the word alone standing for a table with that form.
pub(super) struct WrittenPayload {
    pub(super) place: Place,
    pub(super) form: Field<String>,
    pub(super) list: Field<String>,
    pub(super) by_source: Field<String>,
    pub(super) item: Field<WrittenItem>,
    pub(super) value: Field<WrittenAt>,
    pub(super) source: Field<WrittenSourceAt>,
    pub(super) time: Field<WrittenAt>,
    pub(super) time_form: Field<String>,
    pub(super) cycle: Field<WrittenAt>,
    pub(super) unit: Field<WrittenAt>,
    pub(super) unit_written: Field<String>,
    pub(super) header: Field<Vec<Node>>,
    pub(super) separator: Field<String>,
    pub(super) decimal: Field<String>,
    pub(super) reorder: Field<String>,
    pub(super) rebirth: Field<bool>,
    pub(super) writer: Field<String>,
}

/// `item`: where things stand in one of several measurements.
#[derive(Default)]
pub(super) struct WrittenItem {
    pub(super) value: Field<WrittenAt>,
    pub(super) source: Field<WrittenSourceAt>,
    pub(super) time: Field<WrittenAt>,
    pub(super) cycle: Field<WrittenAt>,
    pub(super) unit: Field<WrittenAt>,
}

/// Where something stands: a pointer, name or word, or the number of a column.
#[derive(Clone)]
pub(super) enum WrittenAt {
    Text(String),
    Column(i64),
}

/// Where the source is named, or the number from which it follows.
pub(super) enum WrittenSourceAt {
    At(WrittenAt),
    Counted {
        place: Place,
        counter: Field<WrittenAt>,
        at_zero: Field<String>,
    },
}

impl WrittenPayload {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            place: s.place.clone(),
            form: s.text("form", faults),
            list: s.text("list", faults),
            by_source: s.text("by_source", faults),
            item: s
                .section("item", "bank.payload.item", faults)
                .map(|section, _| WrittenItem::read(section, faults)),
            value: at(&mut s, "value", faults),
            source: source(&mut s, faults),
            time: at(&mut s, "time", faults),
            time_form: s.text("time_form", faults),
            cycle: at(&mut s, "cycle", faults),
            unit: at(&mut s, "unit", faults),
            unit_written: s.text("unit_written", faults),
            header: s.list("header", faults),
            separator: s.text("separator", faults),
            decimal: s.text("decimal", faults),
            reorder: s.text("reorder", faults),
            rebirth: s.flag("rebirth", faults),
            writer: s.text("writer", faults),
        };
        s.close(faults);
        written
    }

    fn of_form(form: String, place: Place) -> Self {
        Self {
            place: place.clone(),
            form: Field::Given(Spot { value: form, place }),
            list: Field::Absent,
            by_source: Field::Absent,
            item: Field::Absent,
            value: Field::Absent,
            source: Field::Absent,
            time: Field::Absent,
            time_form: Field::Absent,
            cycle: Field::Absent,
            unit: Field::Absent,
            unit_written: Field::Absent,
            header: Field::Absent,
            separator: Field::Absent,
            decimal: Field::Absent,
            reorder: Field::Absent,
            rebirth: Field::Absent,
            writer: Field::Absent,
        }
    }

    /// The keys that are given and that not every form knows, with their places.
    pub(super) fn given(&self) -> Vec<(&'static str, Place)> {
        fn of<T>(name: &'static str, field: &Field<T>) -> Option<(&'static str, Place)> {
            field.peek().map(|spot| (name, spot.place.clone()))
        }
        let all = [
            of("list", &self.list),
            of("by_source", &self.by_source),
            of("item", &self.item),
            of("value", &self.value),
            of("source", &self.source),
            of("time", &self.time),
            of("time_form", &self.time_form),
            of("cycle", &self.cycle),
            of("unit", &self.unit),
            of("unit_written", &self.unit_written),
            of("header", &self.header),
            of("separator", &self.separator),
            of("decimal", &self.decimal),
            of("reorder", &self.reorder),
            of("rebirth", &self.rebirth),
            of("writer", &self.writer),
        ];
        all.into_iter().flatten().collect()
    }
}

impl WrittenItem {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            value: at(&mut s, "value", faults),
            source: source(&mut s, faults),
            time: at(&mut s, "time", faults),
            cycle: at(&mut s, "cycle", faults),
            unit: at(&mut s, "unit", faults),
        };
        s.close(faults);
        written
    }
}

/// `payload`: a word or a table.
pub(super) fn payload(s: &mut Section, faults: &mut FaultList) -> Field<WrittenPayload> {
    let how = |kind, place: &Place, faults: &mut FaultList| match kind {
        Kind::Text(form) => Ok(WrittenPayload::of_form(form, place.clone())),
        Kind::Table(table) => {
            let section = Section::new("bank.payload", place.clone(), table);
            Ok(WrittenPayload::read(section, faults))
        }
        other => Err(other.what()),
    };
    s.either("payload", "a word or a table", faults, how)
}

fn at_kind(kind: Kind) -> Result<WrittenAt, &'static str> {
    match kind {
        Kind::Text(text) => Ok(WrittenAt::Text(text)),
        Kind::Whole(Some(column)) => Ok(WrittenAt::Column(column)),
        other => Err(other.what()),
    }
}

fn at(s: &mut Section, name: &'static str, faults: &mut FaultList) -> Field<WrittenAt> {
    let wanted = "text in quotes, or the number of a column";
    s.either(name, wanted, faults, |kind, _, _| at_kind(kind))
}

fn source(s: &mut Section, faults: &mut FaultList) -> Field<WrittenSourceAt> {
    let how = |kind, place: &Place, faults: &mut FaultList| match kind {
        Kind::Table(table) => {
            let mut section = Section::new("bank.payload.source", place.clone(), table);
            let written = WrittenSourceAt::Counted {
                place: place.clone(),
                counter: at(&mut section, "counter", faults),
                at_zero: section.text("at_zero", faults),
            };
            section.close(faults);
            Ok(written)
        }
        other => at_kind(other).map(WrittenSourceAt::At),
    };
    let wanted = "text in quotes, the number of a column, or a table with `counter`";
    s.either("source", wanted, faults, how)
}
