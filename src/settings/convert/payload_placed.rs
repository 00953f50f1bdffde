//! Forms of payload in which things are found by place: pointers and columns.

use crate::model::Name;
use crate::settings::check::Check;
use crate::settings::fault::Place;
use crate::settings::keys;
use crate::settings::section::{Field, Spot};
use crate::settings::written_payload::{WrittenAt, WrittenItem, WrittenPayload, WrittenSourceAt};
use crate::settings::{
    CsvForm, DecimalMark, Fields, Items, JsonForm, Of, PayloadForm, Pointer, SourceAt, TimeForm,
    Turn, UnitAt,
};

use super::payload::Maker;
use super::pointer::{column, pointer, words};

impl Maker<'_, '_> {
    pub(super) fn json(&mut self, written: WrittenPayload) -> Option<PayloadForm> {
        let WrittenPayload {
            place,
            list,
            by_source,
            item,
            value,
            source,
            time,
            time_form,
            cycle,
            unit,
            unit_written,
            ..
        } = written;
        let check = &mut self.check;
        if let (Some(_), Some(other)) = (list.peek(), by_source.peek()) {
            let message = "`list` and `by_source` are both given";
            check.add(&other.place, message, "keep the one that fits the payload");
        }
        let several = list.peek().is_some() || by_source.peek().is_some();
        if let (false, Some(spot)) = (several, item.peek()) {
            let message = "`item` means nothing with one measurement in a message";
            let hint = "write `list` or `by_source` too, or its keys without `item`";
            check.add(&spot.place, message, hint);
        }
        if let (true, Some(spot)) = (several, value.peek()) {
            let message = "`value` stands in each item";
            check.add(&spot.place, message, "write `item = { value = \"/v\" }`");
        }
        let by_name = by_source.peek().is_some();
        let plain = |text: Field<String>| text.map(|text, _| WrittenAt::Text(text));
        let list = pointer(plain(list), "list", check)?;
        let by_source = pointer(plain(by_source), "by_source", check)?;
        let item = match item {
            Field::Given(spot) => spot.value,
            Field::Absent => WrittenItem::default(),
            Field::Faulty => return None,
        };
        let items = match (list, by_source) {
            (Some(at), _) => Items::List(at),
            (None, Some(at)) => Items::BySource(at),
            (None, None) => Items::One,
        };
        let value = match (several, item.value, value) {
            // Members may be the numbers themselves.
            (true, Field::Absent, _) if by_name => Field::Given(Spot {
                value: WrittenAt::Text(String::new()),
                place: place.clone(),
            }),
            (true, inside, _) => inside,
            (false, _, outside) => outside,
        };
        let value = check.required(value, "value");
        let whole = Where {
            value,
            source,
            time,
            cycle,
            unit,
        };
        let inside = Where {
            value: Field::Absent,
            source: item.source,
            time: item.time,
            cycle: item.cycle,
            unit: item.unit,
        };
        let fields = self.json_fields(whole, inside, time_form, unit_written, by_name)?;
        Some(PayloadForm::Json(JsonForm { items, fields }))
    }

    fn json_fields(
        &mut self,
        whole: Where,
        inside: Where,
        time_form: Field<String>,
        unit_written: Field<String>,
        by_name: bool,
    ) -> Option<Fields<Pointer>> {
        let at = |field: Field<WrittenAt>, of: Of, name: &str, check: &mut Check<'_>| {
            let path = pointer(field, name, check)?;
            Some(path.map(|path| Pointer { of, path }))
        };
        let check = &mut self.check;
        for (name, a, b) in [
            ("time", &whole.time, &inside.time),
            ("cycle", &whole.cycle, &inside.cycle),
            ("unit", &whole.unit, &inside.unit),
        ] {
            if let (Some(_), Some(twice)) = (a.peek(), b.peek()) {
                let message = format!("`{name}` is told twice: for the message and for each item");
                check.add(&twice.place, message, "keep the one that is right");
            }
        }
        let value = at(whole.value, Of::Item, "value", check)??;
        let time = at(whole.time, Of::Message, "time", check)?.or(at(
            inside.time,
            Of::Item,
            "time",
            check,
        )?);
        let cycle = at(whole.cycle, Of::Message, "cycle", check)?.or(at(
            inside.cycle,
            Of::Item,
            "cycle",
            check,
        )?);
        let unit = at(whole.unit, Of::Message, "unit", check)?.or(at(
            inside.unit,
            Of::Item,
            "unit",
            check,
        )?);
        let (source, of) = match inside.source {
            Field::Absent => (whole.source, Of::Message),
            own => (own, Of::Item),
        };
        let counted = cycle.is_some();
        let source = self.source(source, counted, |field, name, check| {
            at(field, of, name, check)
        })?;
        let source = match source {
            SourceAt::Topic if by_name => SourceAt::Member,
            source => source,
        };
        let time_form = self.time_form(time_form, time.is_some());
        let unit = self.unit(unit, unit_written);
        Some(Fields {
            value,
            source,
            time,
            time_form,
            cycle,
            unit,
        })
    }

    pub(super) fn csv(&mut self, written: WrittenPayload) -> Option<PayloadForm> {
        let WrittenPayload {
            value,
            source,
            time,
            time_form,
            cycle,
            unit,
            unit_written,
            header,
            separator,
            decimal,
            ..
        } = written;
        let check = &mut self.check;
        let header = words(header, "header", check)?;
        let at = |field: Field<WrittenAt>, name: &str, check: &mut Check<'_>| {
            column(field, name, &header, check)
        };
        let value = check.required(value, "value");
        let value = at(value, "value", check);
        let time = at(time, "time", check)?;
        let cycle = at(cycle, "cycle", check)?;
        let unit = at(unit, "unit", check)?;
        let marks = [("point", DecimalMark::Point), ("comma", DecimalMark::Comma)];
        let decimal = check
            .word(decimal, "decimal", &marks)
            .map_or(DecimalMark::Point, |s| s.value);
        let separator = separator_of(separator, decimal, check);
        let source = self.source(source, cycle.is_some(), at)?;
        let time_form = self.time_form(time_form, time.is_some());
        let unit = self.unit(unit, unit_written);
        let fields = Fields {
            value: value??,
            source,
            time,
            time_form,
            cycle,
            unit,
        };
        Some(PayloadForm::Csv(CsvForm {
            fields,
            header,
            separator: separator?,
            decimal,
        }))
    }

    /// Where the source is; `None` when that is faulty.
    fn source<A>(
        &mut self,
        field: Field<WrittenSourceAt>,
        has_cycle: bool,
        mut at: impl FnMut(Field<WrittenAt>, &str, &mut Check<'_>) -> Option<Option<A>>,
    ) -> Option<SourceAt<A>> {
        let Spot { value, place } = match field {
            Field::Given(spot) => spot,
            Field::Absent => return Some(SourceAt::Topic),
            Field::Faulty => return None,
        };
        match value {
            WrittenSourceAt::At(written) => {
                let field = Field::Given(Spot {
                    value: written,
                    place,
                });
                at(field, "source", &mut self.check)?.map(SourceAt::At)
            }
            WrittenSourceAt::Counted {
                place,
                counter,
                at_zero,
            } => {
                let mut check = self.check.inside("bank.payload.source", &place);
                let counter = check.required(counter, "counter");
                let counter = at(counter, "counter", &mut check)??;
                if has_cycle {
                    let message = "`cycle` is given, and follows from `counter` already";
                    check.add(&place, message, "take `cycle` out");
                }
                let turn = turn(at_zero, &self.around.listed, &place, &mut check)?;
                Some(SourceAt::Counted { counter, turn })
            }
        }
    }

    fn time_form(&mut self, field: Field<String>, timed: bool) -> TimeForm {
        if let (false, Some(spot)) = (timed, field.peek()) {
            let message = "`time_form` is given without `time`";
            self.check.add(
                &spot.place.clone(),
                message,
                keys::example("bank.payload", "time"),
            );
        }
        #[derive(Clone, Copy)]
        enum Word {
            Auto,
            Rfc3339,
            EpochSeconds,
            EpochMilliseconds,
            Local,
        }
        let known = [
            ("auto", Word::Auto),
            ("rfc3339", Word::Rfc3339),
            ("epoch_seconds", Word::EpochSeconds),
            ("epoch_milliseconds", Word::EpochMilliseconds),
            ("local", Word::Local),
        ];
        let word = self.check.word(field, "time_form", &known);
        match word.map_or(Word::Auto, |spot| spot.value) {
            Word::Auto => TimeForm::Auto,
            Word::Rfc3339 => TimeForm::Rfc3339,
            Word::EpochSeconds => TimeForm::EpochSeconds,
            Word::EpochMilliseconds => TimeForm::EpochMilliseconds,
            Word::Local => TimeForm::Local(self.around.zone.clone()),
        }
    }

    fn unit<A>(&mut self, at: Option<A>, written: Field<String>) -> Option<UnitAt<A>> {
        if let (None, Some(spot)) = (&at, written.peek()) {
            let message = "`unit_written` is given without `unit`";
            self.check.add(
                &spot.place.clone(),
                message,
                keys::example("bank.payload", "unit"),
            );
        }
        let wanted = self.unit_words(written);
        at.map(|at| UnitAt { at, wanted })
    }

    /// How the unit must be written in the payload: as in the bank when nothing else is said.
    pub(super) fn unit_words(&mut self, written: Field<String>) -> String {
        let own = self
            .check
            .name(written, "unit_written")
            .map(|name| name.to_string());
        own.or_else(|| self.around.unit.clone()).unwrap_or_default()
    }
}

/// Where things stand as written, of the message or of an item.
struct Where {
    value: Field<WrittenAt>,
    source: Field<WrittenSourceAt>,
    time: Field<WrittenAt>,
    cycle: Field<WrittenAt>,
    unit: Field<WrittenAt>,
}

/// Who comes after whom.
fn turn(
    at_zero: Field<String>,
    listed: &[Name],
    place: &Place,
    check: &mut Check<'_>,
) -> Option<Turn> {
    if listed.is_empty() {
        let message =
            "the source can only follow from a counter when `sources` lists them in their turn";
        check.add(place, message, keys::example("bank", "sources"));
        return None;
    }
    let first = match at_zero {
        Field::Absent => return Turn::new(listed.to_vec(), 0),
        Field::Faulty => return None,
        Field::Given(spot) => spot,
    };
    let at = listed.iter().position(|name| **name == *first.value);
    if at.is_none() {
        let message = format!(
            "`at_zero` is \"{}\", which is none of `sources`",
            first.value.escape_debug()
        );
        check.add(
            &first.place,
            message,
            keys::example("bank.payload.source", "at_zero"),
        );
    }
    Turn::new(listed.to_vec(), at?)
}

fn separator_of(field: Field<String>, decimal: DecimalMark, check: &mut Check<'_>) -> Option<u8> {
    let own = match decimal {
        DecimalMark::Point => b',',
        DecimalMark::Comma => b';',
    };
    let Spot { value, place } = match field {
        Field::Given(spot) => spot,
        Field::Absent => return Some(own),
        Field::Faulty => return None,
    };
    let example = || keys::example("bank.payload", "separator");
    match value.as_bytes() {
        [b','] if decimal == DecimalMark::Comma => {
            let message = "`separator` and the decimal mark are both a comma";
            check.add(&place, message, example());
            None
        }
        [one] if one.is_ascii_punctuation() && *one != b'"' || matches!(one, b'\t' | b' ') => {
            Some(*one)
        }
        _ => {
            check.add(
                &place,
                "`separator` must be one mark, blank or tabulator",
                example(),
            );
            None
        }
    }
}
