//! JSON lines: one object per line, with the names of the columns as members.

use std::io::BufRead;

use serde_json::value::RawValue;

use crate::intake::payload::{Fault, json};
use crate::model::Reason;
use crate::settings::{RecordingColumns, TimeForm};

use super::input::Input;
use super::{How, Next, Row};

/// Reads objects line by line.
pub(super) struct Lines {
    input: Input,
    columns: Pointers,
    /// Whether a line may leave the source out.
    may_name_none: bool,
    /// Lines read so far.
    line: u64,
}

/// The columns as pointers to members of the top level.
struct Pointers {
    time: String,
    source: String,
    value: String,
    cycle: String,
    bank: String,
}

impl Lines {
    pub(super) fn new((line, input): (u64, Input), how: &How) -> Self {
        let pointer = |name: &str| format!("/{}", name.replace('~', "~0").replace('/', "~1"));
        let RecordingColumns {
            time,
            source,
            value,
            cycle,
            bank,
        } = &how.columns;
        let columns = Pointers {
            time: pointer(time),
            source: pointer(source),
            value: pointer(value),
            cycle: pointer(cycle),
            bank: pointer(bank),
        };
        Self {
            input,
            columns,
            may_name_none: how.may_name_none(),
            line,
        }
    }

    pub(super) fn next_row(&mut self) -> Next {
        let mut bytes = Vec::new();
        loop {
            bytes.clear();
            match self.input.read_until(b'\n', &mut bytes) {
                Ok(0) => return Next::End,
                Ok(_) => self.line += 1,
                Err(error) => {
                    return Next::Broken {
                        line: self.line,
                        why: error.to_string(),
                    };
                }
            }
            if !bytes.trim_ascii().is_empty() {
                break;
            }
        }
        let text = String::from_utf8_lossy(bytes.trim_ascii()).into_owned();
        match self.row(&text) {
            Ok(row) => Next::Row(Row { text, ..row }),
            Err(fault) => Next::Bad {
                line: self.line,
                fault,
                text,
            },
        }
    }

    fn row(&self, text: &str) -> Result<Row, Fault> {
        let document = json::document(text)?;
        let at = |pointer: &str| json::find(document, pointer);
        let needed = |pointer: &str| {
            at(pointer)?.ok_or_else(|| {
                let words = format!("there is no \"{}\"", pointer.trim_start_matches('/'));
                Fault::new(Reason::FieldMissing, words)
            })
        };
        let time = |raw: &RawValue| json::time(raw, &TimeForm::Auto);
        let source = match at(&self.columns.source)? {
            None if self.may_name_none => String::new(),
            _ => json::source(needed(&self.columns.source)?)?.into_owned(),
        };
        let value = json::value(needed(&self.columns.value)?);
        let bank = at(&self.columns.bank)?.map(json::source).transpose()?;
        let turn = at("/turn")?.map(json::cycle).transpose()?;
        Ok(Row {
            line: self.line,
            bank: bank.map(|bank| bank.into_owned()),
            taken: needed(&self.columns.time).and_then(time),
            cycle: at(&self.columns.cycle)?.map(json::cycle).transpose(),
            received: at("/received")?.map(time).transpose(),
            turn: turn.and_then(|turn| u64::try_from(turn).ok()),
            values: vec![(source, value)],
            text: String::new(),
        })
    }
}
