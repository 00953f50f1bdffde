//! The form `csv`: lines of separated values, one measurement a line.
//!
//! Quotation marks are those of RFC 4180. A first line that consists of the configured header is no
//! measurement. Deliberately absent: guessing a separator or a decimal comma. With `decimal =
//! "comma"` a point in a number is refused, because it may part thousands as well as tenths.

use std::borrow::Cow;

use csv::{ReaderBuilder, StringRecord, Trim};

use crate::model::{Reason, Time, Value};
use crate::settings::{CsvForm, DecimalMark, Fields, SourceAt};

use super::number::shown;
use super::{Decoded, Decodings, Fault, MOST_ITEMS, json, number, source_of_topic, times};

/// Decodes the lines of a message.
pub(super) fn decode<'a>(
    form: &'a CsvForm,
    text: &str,
    topic_source: Option<&'a str>,
) -> Result<Decodings<'a>, Fault> {
    let mut reader = ReaderBuilder::new()
        .has_headers(false)
        .flexible(true)
        .delimiter(form.separator)
        .trim(Trim::All)
        .from_reader(text.as_bytes());
    let mut all = Vec::new();
    let mut record = StringRecord::new();
    let mut first = true;
    loop {
        match reader.read_record(&mut record) {
            Ok(false) => break,
            Ok(true) => {}
            Err(error) => {
                let detail = format!("the lines cannot be read: {error}");
                return Err(Fault::new(Reason::Malformed, detail));
            }
        }
        // A line of blanks is no line.
        if record.iter().all(str::is_empty) && record.len() < 2 {
            continue;
        }
        if std::mem::take(&mut first) && is_header(form, &record) {
            continue;
        }
        if all.len() == MOST_ITEMS {
            let detail =
                format!("there are more than {MOST_ITEMS} lines, send them in several messages");
            return Err(Fault::new(Reason::TooLarge, detail));
        }
        let number = record.position().map_or(0, csv::Position::line);
        let decoded = line(form, &record, topic_source);
        all.push(decoded.map_err(|fault| fault.within(format_args!("line {number}"))));
    }
    if all.is_empty() {
        let detail = "there is no line with a measurement";
        return Err(Fault::new(Reason::Empty, detail));
    }
    Ok(all)
}

fn is_header(form: &CsvForm, record: &StringRecord) -> bool {
    !form.header.is_empty() && record.iter().eq(form.header.iter().map(String::as_str))
}

fn line<'a>(
    form: &'a CsvForm,
    record: &StringRecord,
    topic_source: Option<&'a str>,
) -> Result<Decoded<'a>, Fault> {
    let Fields {
        value,
        source,
        time,
        time_form,
        cycle,
        unit,
    } = &form.fields;
    let cell = |column: usize, what: &str| -> Result<&str, Fault> {
        let found = record.get(column).filter(|cell| !cell.is_empty());
        found.ok_or_else(|| {
            let detail = format!("there is no {what} in column {}", column + 1);
            Fault::new(Reason::FieldMissing, detail)
        })
    };
    let whole = |column: usize, what: &str| json::whole(cell(column, what)?);
    let mut of_cycle = cycle.map(|column| whole(column, "cycle")).transpose()?;
    let source: Cow<'a, str> = match (topic_source, source) {
        (Some(topic), _) => Cow::Borrowed(topic),
        (None, SourceAt::At(column)) => Cow::Owned(cell(*column, "source")?.to_owned()),
        (None, SourceAt::Counted { counter, turn }) => {
            let (name, cycle) = turn.of(whole(*counter, "counter")?);
            of_cycle = Some(cycle);
            Cow::Borrowed(name.as_ref())
        }
        (None, SourceAt::Topic | SourceAt::Member) => source_of_topic(None)?,
    };
    if let Some(unit) = unit {
        super::same_unit(cell(unit.at, "unit")?, &unit.wanted)?;
    }
    let taken: Option<Time> = match time {
        Some(column) => Some(times::from_cell(cell(*column, "time")?, time_form)?),
        None => None,
    };
    Ok(Decoded {
        source,
        value: number_of(cell(*value, "value")?, form.decimal)?,
        taken,
        cycle: of_cycle,
    })
}

fn number_of(cell: &str, decimal: DecimalMark) -> Result<Value, Fault> {
    match decimal {
        DecimalMark::Point => number::value(cell),
        DecimalMark::Comma if cell.contains('.') => {
            let detail = format!(
                "{} has a point, and `decimal = \"comma\"` is configured",
                shown(cell)
            );
            Err(Fault::new(Reason::NotANumber, detail))
        }
        DecimalMark::Comma if cell.matches(',').count() > 1 => {
            let detail = format!("{} has more than one comma", shown(cell));
            Err(Fault::new(Reason::NotANumber, detail))
        }
        DecimalMark::Comma => number::value(&cell.replace(',', ".")),
    }
}
