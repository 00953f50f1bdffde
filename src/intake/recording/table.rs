//! Tables (CSV) in long form, one value per row, and in wide form, one column per source.

use std::collections::BTreeSet;
use std::io::{BufRead, Read};

use csv::StringRecord;

use crate::intake::payload::{Fault, json, number, times};
use crate::model::{Reason, Time};
use crate::settings::TimeForm;

use super::input::Input;
use super::{How, Next, OpenError, Row};

/// Reads a table row by row.
pub(super) struct Table {
    reader: csv::Reader<Input>,
    columns: Columns,
    record: StringRecord,
    /// Cells in a row.
    width: usize,
    /// Blank lines before the header.
    skipped: u64,
    line: u64,
    ended: bool,
}

/// Where the columns stand.
struct Columns {
    time: usize,
    cycle: Option<usize>,
    bank: Option<usize>,
    received: Option<usize>,
    turn: Option<usize>,
    form: Form,
}

enum Form {
    Long {
        /// `None` where the time tells the source.
        source: Option<usize>,
        value: usize,
    },
    /// Place and name of each source's column.
    Wide(Vec<(usize, String)>),
}

impl Table {
    pub(super) fn new(
        name: &str,
        (skipped, mut input): (u64, Input),
        how: &How,
    ) -> Result<Self, OpenError> {
        let unreadable = |why: String| OpenError::Header {
            name: name.to_owned(),
            why,
        };
        let mut first = Vec::new();
        input
            .read_until(b'\n', &mut first)
            .map_err(|error| unreadable(error.to_string()))?;
        let delimiter = delimiter(&first);
        let whole: Input = Box::new(std::io::Cursor::new(first).chain(input));
        let mut reader = csv::ReaderBuilder::new()
            .delimiter(delimiter)
            // With the reader's own idea of line ends, CR LF would shift the line numbers by one;
            // the CR is trimmed as a blank.
            .terminator(csv::Terminator::Any(b'\n'))
            .trim(csv::Trim::All)
            .flexible(true)
            .from_reader(whole);
        let header = reader
            .headers()
            .map_err(|error| unreadable(error.to_string()))?
            .clone();
        let columns = Columns::find(&header, how).map_err(|why| OpenError::Columns {
            name: name.to_owned(),
            why,
            columns: header.iter().collect::<Vec<_>>().join(", "),
        })?;
        Ok(Self {
            reader,
            columns,
            record: StringRecord::new(),
            width: header.len(),
            skipped,
            line: skipped + 1,
            ended: false,
        })
    }

    /// Whether there is a column that names the bank.
    pub(super) fn names_banks(&self) -> bool {
        self.columns.bank.is_some()
    }

    pub(super) fn next_row(&mut self) -> Next {
        if self.ended {
            return Next::End;
        }
        loop {
            match self.reader.read_record(&mut self.record) {
                Ok(true) => self.line = self.place(),
                Ok(false) => return Next::End,
                Err(error) => return self.fault(&error),
            }
            if self.record.len() > 1 || self.record.iter().any(|cell| !cell.is_empty()) {
                break;
            }
        }
        if self.record.len() == self.width {
            return Next::Row(self.columns.row(self.line, &self.record));
        }
        let (cells, width) = (self.record.len(), self.width);
        Next::Bad {
            line: self.line,
            fault: Fault::new(
                Reason::Malformed,
                format!("the row has {cells} cells, the header has {width}"),
            ),
            text: written(&self.record),
        }
    }

    /// The line on which the record just read starts. The reader's own position of a record is
    /// where it began to look for one, before blank lines; every record ends with its line.
    fn place(&self) -> u64 {
        let next = self.skipped + self.reader.position().line();
        let inside = written(&self.record).matches('\n').count() as u64;
        next.saturating_sub(1 + inside)
    }

    fn fault(&mut self, error: &csv::Error) -> Next {
        self.record.clear();
        self.line = self.place();
        let line = self.line;
        if let csv::ErrorKind::Io(why) = error.kind() {
            let why = why.to_string();
            self.ended = true;
            return Next::Broken { line, why };
        }
        let words = match error.kind() {
            csv::ErrorKind::Utf8 { .. } => "the row is not UTF-8 text".to_owned(),
            _ => error.to_string(),
        };
        let fault = Fault::new(Reason::Malformed, words);
        let text = String::new();
        Next::Bad { line, fault, text }
    }
}

/// A row as text.
fn written(record: &StringRecord) -> String {
    record.iter().collect::<Vec<_>>().join(",")
}

/// The separator that the first line uses most: comma, semicolon or tab.
fn delimiter(line: &[u8]) -> u8 {
    let count = |separator: u8| line.iter().filter(|&&byte| byte == separator).count();
    // `max_by_key` takes the last of equals: the comma.
    [b'\t', b';', b',']
        .into_iter()
        .max_by_key(|&separator| count(separator))
        .unwrap_or(b',')
}

impl Columns {
    fn find(header: &StringRecord, how: &How) -> Result<Self, String> {
        let names = &how.columns;
        let mut seen = BTreeSet::new();
        if let Some(twice) = header.iter().find(|name| !seen.insert(*name)) {
            return Err(format!("the column '{twice}' stands twice"));
        }
        let at = |name: &str| header.iter().position(|column| column == name);
        let missing = |name: &str| format!("there is no column '{name}'");
        let time = at(&names.time).ok_or_else(|| missing(&names.time))?;
        let (cycle, bank) = (at(&names.cycle), at(&names.bank));
        let (received, turn) = (at("received"), at("turn"));
        let form = match (at(&names.source), at(&names.value)) {
            (None, Some(value)) if how.may_name_none() => Form::Long {
                source: None,
                value,
            },
            (Some(source), Some(value)) => Form::Long {
                source: Some(source),
                value,
            },
            (Some(_), None) => return Err(missing(&names.value)),
            (None, Some(_)) => return Err(missing(&names.source)),
            (None, None) => {
                let other = [Some(time), cycle, bank, received, turn];
                let sources: Vec<_> = header
                    .iter()
                    .enumerate()
                    .filter(|(at, name)| !other.contains(&Some(*at)) && !name.is_empty())
                    .map(|(at, name)| (at, name.to_owned()))
                    .collect();
                if sources.is_empty() {
                    return Err(format!(
                        "there are neither columns '{}' and '{}' nor one column per source",
                        names.source, names.value
                    ));
                }
                Form::Wide(sources)
            }
        };
        Ok(Self {
            time,
            cycle,
            bank,
            received,
            turn,
            form,
        })
    }

    fn row(&self, line: u64, record: &StringRecord) -> Row {
        let cell = |at: usize| record.get(at).unwrap_or("");
        let filled = |at: Option<usize>| at.map(cell).filter(|text| !text.is_empty());
        let time = |text: &str| -> Result<Time, Fault> { times::from_cell(text, &TimeForm::Auto) };
        let values = match &self.form {
            Form::Long { source, value } => {
                let source = source.map_or("", cell);
                vec![(source.to_owned(), number::value(cell(*value)))]
            }
            Form::Wide(sources) => sources
                .iter()
                .filter(|(at, _)| !cell(*at).is_empty())
                .map(|(at, source)| (source.clone(), number::value(cell(*at))))
                .collect(),
        };
        Row {
            line,
            bank: filled(self.bank).map(str::to_owned),
            taken: time(cell(self.time)),
            cycle: filled(self.cycle).map(json::whole).transpose(),
            received: filled(self.received).map(time).transpose(),
            turn: filled(self.turn).and_then(|text| text.parse().ok()),
            values,
            text: written(record),
        }
    }
}
