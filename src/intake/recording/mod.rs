//! Recorded measurements from files, for `rehearse`: CSV in long or wide form and JSON lines, plain
//! or gzip, from a file or from standard input.
//!
//! ```text
//! let how = How { banks, bank: Some(BankIx(0)), columns: RecordingColumns::default(), beliefs, told_by };
//! for row in recording::open(&Source::named("week.csv.gz"), &how)? {
//!     match row {
//!         Ok(recorded) => …            // one measurement, in the order of the file
//!         Err(Fault::Refused { line, refusal }) => …   // counted; the reading goes on
//!         Err(Fault::Broken(error)) => …               // the last item: what follows is lost
//!     }
//! }
//! ```
//!
//! A bank whose sources are shifts needs no source: the time tells it.
//!
//! A table is long when its header has the columns of source and value, wide when it has neither;
//! in wide form every column that is not `time`, `cycle`, `bank`, `received` or `turn` is a source
//! and an empty cell is a missing value. Columns may be separated by comma, semicolon or tab. A JSON
//! line is an object with the same names, in long form. Times are RFC 3339 with an offset or numbers
//! since 1970 (seconds below 1e11, milliseconds from there on).
//!
//! What must hold: memory stays bounded whatever the file holds ([`MOST_LINE_BYTES`]); a bad row is
//! refused with its line, never skipped in silence. Deliberately absent: sorting by time, and
//! judging the measurements.

mod input;
mod lines;
mod table;

use std::collections::VecDeque;
use std::path::{Path, PathBuf};

use crate::model::{BankIx, Measurement, Name, Reason, Refusal, Time};
use crate::settings::{Belief, RecordingColumns, ToldBy};

use super::names::Names;
use super::payload::{Fault as PayloadFault, believed, excerpt};

pub use input::MOST_LINE_BYTES;

/// Where a recording is read from.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Source {
    /// Standard input.
    Stdin,
    /// A file.
    File(PathBuf),
}

impl Source {
    /// As named on the command line: `-` is standard input.
    pub fn named(name: impl AsRef<Path>) -> Self {
        let name = name.as_ref();
        if name.as_os_str() == "-" {
            Self::Stdin
        } else {
            Self::File(name.to_owned())
        }
    }

    /// What people call it.
    pub fn name(&self) -> String {
        match self {
            Self::Stdin => "standard input".to_owned(),
            Self::File(path) => path.display().to_string(),
        }
    }
}

/// How to read a recording.
#[derive(Clone, Debug)]
pub struct How {
    /// The names of the banks, by [`BankIx`].
    pub banks: Vec<Name>,
    /// The bank of rows that name none; not needed when there is only one bank.
    pub bank: Option<BankIx>,
    /// The names of the columns.
    pub columns: RecordingColumns,
    /// What is believed of the values of each bank, by [`BankIx`]; without an entry everything.
    pub beliefs: Vec<Belief>,
    /// What tells the source of each bank's values, by [`BankIx`]; without an entry the recording.
    pub told_by: Vec<ToldBy>,
}

impl How {
    /// Whether a recording may leave the sources out.
    fn may_name_none(&self) -> bool {
        self.told_by.contains(&ToldBy::Time)
    }
}

/// One measurement of a recording.
#[derive(Clone, Debug, PartialEq)]
pub struct Recorded {
    /// The line it stands on, from 1.
    pub line: u64,
    /// The measurement; `taken` is always known.
    pub measurement: Measurement,
    /// When it reached the daemon that recorded it.
    pub received: Option<Time>,
    /// The turn of the daemon that recorded it.
    pub turn: Option<u64>,
}

/// What is wrong with a part of a recording.
#[derive(Debug, thiserror::Error)]
pub enum Fault {
    /// One value or row is no measurement; reading goes on.
    #[error("line {line}: {}", refusal.detail)]
    Refused {
        /// The line, from 1.
        line: u64,
        /// Why; its topic is the name of the recording and the line.
        refusal: Refusal,
    },
    /// Reading ended here before the end; nothing follows this.
    #[error(transparent)]
    Broken(#[from] ReadError),
}

/// Why reading a recording ended before its end.
#[derive(Debug, thiserror::Error)]
#[error("{name}: reading stopped after line {line}: {why}; what follows is not in the result")]
pub struct ReadError {
    /// The recording.
    pub name: String,
    /// The last line that was read.
    pub line: u64,
    /// What the system said.
    pub why: String,
}

/// Why a recording cannot be read at all.
#[derive(Debug, thiserror::Error)]
pub enum OpenError {
    /// The file cannot be opened.
    #[error("{name}: {why}")]
    Open {
        /// The recording.
        name: String,
        /// What the system said.
        why: std::io::Error,
    },
    /// There is nothing in it.
    #[error("{name}: the recording is empty")]
    Empty {
        /// The recording.
        name: String,
    },
    /// The start cannot be read.
    #[error("{name}: the first line cannot be read: {why}")]
    Header {
        /// The recording.
        name: String,
        /// What is wrong.
        why: String,
    },
    /// The columns are not those of either form.
    #[error("{name}: {why}; the columns are: {columns}")]
    Columns {
        /// The recording.
        name: String,
        /// What is missing or wrong.
        why: String,
        /// What the header says.
        columns: String,
    },
    /// Nothing says to which of several banks the rows belong.
    #[error(
        "{name}: the recording has no column '{column}' and there are several banks; say which one is meant ({banks})"
    )]
    NoBank {
        /// The recording.
        name: String,
        /// The column that would name the bank.
        column: String,
        /// The banks there are.
        banks: String,
    },
}

/// Opens a recording; see the head of this file.
///
/// # Errors
/// [`OpenError`] when there is nothing that could be read row by row.
pub fn open(source: &Source, how: &How) -> Result<Recording, OpenError> {
    let name = source.name();
    let open = |why| OpenError::Open {
        name: name.clone(),
        why,
    };
    let mut input = input::open(source).map_err(open)?;
    let rows = match input::start(&mut input).map_err(open)? {
        None => return Err(OpenError::Empty { name }),
        Some((b'{', skipped)) => Rows::Lines(lines::Lines::new((skipped, input), how)),
        Some((_, skipped)) => {
            let from = (skipped, input);
            Rows::Table(table::Table::new(&name, from, how)?)
        }
    };
    let recording = Recording {
        name,
        rows: Some(rows),
        judge: Judge::new(how),
        ready: VecDeque::new(),
    };
    recording.check_bank(how)?;
    Ok(recording)
}

/// The measurements of a recording, in the order of the file.
pub struct Recording {
    name: String,
    /// `None` once reading has ended.
    rows: Option<Rows>,
    judge: Judge,
    /// The rest of a row that holds several measurements.
    ready: VecDeque<Result<Recorded, Fault>>,
}

enum Rows {
    Table(table::Table),
    Lines(lines::Lines),
}

/// One row as read: what all its values share, and the values.
struct Row {
    line: u64,
    bank: Option<String>,
    taken: Result<Time, PayloadFault>,
    cycle: Result<Option<i64>, PayloadFault>,
    received: Result<Option<Time>, PayloadFault>,
    turn: Option<u64>,
    values: Vec<(String, Result<crate::model::Value, PayloadFault>)>,
    /// The row as text, for the excerpt.
    text: String,
}

/// What came of reading the next row.
enum Next {
    Row(Row),
    /// The row as a whole is wrong.
    Bad {
        line: u64,
        fault: PayloadFault,
        text: String,
    },
    Broken {
        line: u64,
        why: String,
    },
    End,
}

impl Recording {
    /// The recording's name as people know it.
    pub fn name(&self) -> &str {
        &self.name
    }

    fn check_bank(&self, how: &How) -> Result<(), OpenError> {
        let named = match &self.rows {
            Some(Rows::Table(table)) => table.names_banks(),
            // Each line says it or does not; found out line by line.
            _ => true,
        };
        if named || self.judge.otherwise.is_some() {
            return Ok(());
        }
        Err(OpenError::NoBank {
            name: self.name.clone(),
            column: how.columns.bank.clone(),
            banks: how.banks.join(", "),
        })
    }

    fn read(&mut self) -> Next {
        match &mut self.rows {
            None => Next::End,
            Some(Rows::Table(table)) => table.next_row(),
            Some(Rows::Lines(lines)) => lines.next_row(),
        }
    }
}

impl Iterator for Recording {
    type Item = Result<Recorded, Fault>;

    fn next(&mut self) -> Option<Self::Item> {
        loop {
            if let Some(ready) = self.ready.pop_front() {
                return Some(ready);
            }
            match self.read() {
                Next::Row(row) => self.judge.measurements(&self.name, row, &mut self.ready),
                Next::Bad { line, fault, text } => {
                    return Some(Err(refused(&self.name, line, None, fault, &text)));
                }
                Next::Broken { line, why } => {
                    self.rows = None;
                    let name = self.name.clone();
                    return Some(Err(ReadError { name, line, why }.into()));
                }
                Next::End => {
                    self.rows = None;
                    return None;
                }
            }
        }
    }
}

/// Turns rows into measurements.
struct Judge {
    banks: Vec<Name>,
    /// The bank of rows that name none.
    otherwise: Option<BankIx>,
    beliefs: Vec<Belief>,
    told_by: Vec<ToldBy>,
    names: Names,
}

impl Judge {
    fn new(how: &How) -> Self {
        let only = (how.banks.len() == 1).then_some(BankIx(0));
        Self {
            banks: how.banks.clone(),
            otherwise: how.bank.or(only),
            beliefs: how.beliefs.clone(),
            told_by: how.told_by.clone(),
            names: Names::default(),
        }
    }

    fn bank(&self, name: Option<&str>) -> Result<BankIx, PayloadFault> {
        let found = match name {
            Some(name) => self
                .banks
                .iter()
                .position(|bank| bank.as_ref() == name)
                .and_then(|at| u16::try_from(at).ok())
                .map(BankIx),
            None => self.otherwise,
        };
        found.ok_or_else(|| {
            let detail = match name {
                Some(name) => format!(
                    "there is no bank '{}' in the configuration",
                    excerpt(name.as_bytes())
                ),
                None => "the line names no bank and there are several".to_owned(),
            };
            PayloadFault::new(Reason::NoBank, detail)
        })
    }

    fn measurements(&mut self, name: &str, row: Row, out: &mut VecDeque<Result<Recorded, Fault>>) {
        let (line, text) = (row.line, row.text);
        let bank = match self.bank(row.bank.as_deref()) {
            Ok(bank) => bank,
            Err(fault) => {
                out.push_back(Err(refused(name, line, None, fault, &text)));
                return;
            }
        };
        let (cycle, received) = (row.cycle, row.received);
        let shared = row.taken.and_then(|taken| Ok((taken, cycle?, received?)));
        let (taken, cycle, received) = match shared {
            Ok(shared) => shared,
            Err(fault) => {
                out.push_back(Err(refused(name, line, Some(bank), fault, &text)));
                return;
            }
        };
        let told_by = self.told_by.get(bank.index());
        let stand_in = told_by.and_then(|told| told.stand_in());
        for (source, value) in row.values {
            let source = stand_in.map_or(source, str::to_owned);
            let value = super::payload::checked_source(&source).and(value);
            let value = match self.beliefs.get(bank.index()) {
                Some(belief) => value.and_then(|value| {
                    believed(belief, value).map_err(|fault| fault.of_source(&source))
                }),
                None => value,
            };
            out.push_back(match value {
                Ok(value) => Ok(Recorded {
                    line,
                    measurement: Measurement {
                        bank,
                        source: self.names.shared(&source),
                        value,
                        taken: Some(taken),
                        cycle,
                    },
                    received,
                    turn: row.turn,
                }),
                Err(fault) => Err(refused(name, line, Some(bank), fault, &text)),
            });
        }
    }
}

fn refused(name: &str, line: u64, bank: Option<BankIx>, fault: PayloadFault, text: &str) -> Fault {
    let refusal = Refusal {
        bank,
        reason: fault.reason,
        topic: format!("{name} line {line}").into(),
        detail: fault.detail,
        excerpt: excerpt(text.as_bytes()),
    };
    Fault::Refused { line, refusal }
}

#[cfg(test)]
mod tests;
