//! Faults of a configuration: what is wrong, where, and what to do; and how they are shown.
//!
//! Owns the text of the file, so that a fault can be shown in it. Deliberately absent: what counts
//! as a fault.

use std::fmt;
use std::ops::Range;
use std::sync::Arc;

use miette::{
    GraphicalReportHandler, GraphicalTheme, LabeledSpan, MietteDiagnostic, NamedSource, Report,
};

/// More than this many faults come from a file that is no configuration at all, and nobody reads on.
const MOST_SHOWN: usize = 50;

/// Columns of a report: a terminal of a usual width.
const WIDTH: usize = 100;

/// Where a fault is.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Place {
    /// In the file's text.
    Span {
        /// Line, from 1.
        line: usize,
        /// Column in characters, from 1.
        column: usize,
        /// Bytes of the text.
        range: Range<usize>,
    },
    /// In an environment variable of this name.
    Variable(String),
    /// In the file as a whole.
    File,
}

impl Place {
    /// The line, for a place in the text.
    pub fn line(&self) -> Option<usize> {
        match self {
            Self::Span { line, .. } => Some(*line),
            Self::Variable(_) | Self::File => None,
        }
    }

    /// Order in which faults are shown: of the file, down its lines, then variables.
    fn rank(&self) -> (u8, usize, &str) {
        match self {
            Self::File => (0, 0, ""),
            Self::Span { range, .. } => (1, range.start, ""),
            Self::Variable(name) => (2, 0, name),
        }
    }
}

/// One fault.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// What is wrong.
    pub message: String,
    /// What to do.
    pub hint: String,
    /// Where.
    pub place: Place,
}

/// Every fault of a configuration, with the text in which they are shown.
#[derive(Clone, Debug)]
pub struct Faults {
    file: String,
    text: Arc<str>,
    list: Vec<Fault>,
}

/// Whether a report is coloured.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Ink {
    /// Plain text.
    Plain,
    /// With terminal colours.
    Colour,
}

impl Faults {
    /// The faults, in the order of the file.
    pub fn list(&self) -> &[Fault] {
        &self.list
    }

    /// All faults, each with its line of the file and its hint.
    pub fn report(&self, ink: Ink) -> String {
        let handler = handler(ink);
        let source = NamedSource::new(&self.file, Arc::clone(&self.text));
        let mut out = format!("{}\n\n", self.heading());
        for fault in self.list.iter().take(MOST_SHOWN) {
            let report = Report::from(self.diagnostic(fault)).with_source_code(source.clone());
            if handler.render_report(&mut out, report.as_ref()).is_err() {
                out.push_str(&self.line(fault));
            }
            out.push('\n');
        }
        if let Some(more) = self.list.len().checked_sub(MOST_SHOWN + 1) {
            out.push_str(&format!("… and {} more\n", more + 1));
        }
        out
    }

    fn heading(&self) -> String {
        match self.list.len() {
            1 => format!("{}: 1 fault", self.file),
            n => format!("{}: {n} faults", self.file),
        }
    }

    fn diagnostic(&self, fault: &Fault) -> MietteDiagnostic {
        let message = match &fault.place {
            Place::Variable(name) => format!("{name}: {}", fault.message),
            Place::Span { .. } | Place::File => fault.message.clone(),
        };
        let shown = MietteDiagnostic::new(message).with_help(&fault.hint);
        match &fault.place {
            Place::Span { range, .. } => {
                shown.with_label(LabeledSpan::at(self.visible(range), "here"))
            }
            Place::Variable(_) | Place::File => shown,
        }
    }

    /// The part of the range on its first line and inside the text.
    fn visible(&self, range: &Range<usize>) -> Range<usize> {
        let start = range.start.min(self.text.len());
        let end = range.end.clamp(start, self.text.len());
        let first_line = self
            .text
            .get(start..end)
            .and_then(|part| part.lines().next());
        start..start + first_line.map_or(0, str::len)
    }

    fn line(&self, fault: &Fault) -> String {
        let Fault {
            message,
            hint,
            place,
        } = fault;
        match place {
            Place::Span { line, column, .. } => {
                format!("{}:{line}:{column}: {message} ({hint})", self.file)
            }
            Place::Variable(name) => format!("{name}: {message} ({hint})"),
            Place::File => format!("{}: {message} ({hint})", self.file),
        }
    }
}

fn handler(ink: Ink) -> GraphicalReportHandler {
    let theme = match ink {
        Ink::Plain => GraphicalTheme::unicode_nocolor(),
        Ink::Colour => GraphicalTheme::unicode(),
    };
    GraphicalReportHandler::new_themed(theme)
        .with_links(false)
        .with_width(WIDTH)
}

impl fmt::Display for Faults {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.heading())?;
        for fault in &self.list {
            write!(f, "\n{}", self.line(fault))?;
        }
        Ok(())
    }
}

impl std::error::Error for Faults {}

/// Faults while they are being found.
#[derive(Debug, Default)]
pub(super) struct FaultList(Vec<Fault>);

impl FaultList {
    /// Notes a fault.
    pub(super) fn add(
        &mut self,
        place: &Place,
        message: impl Into<String>,
        hint: impl Into<String>,
    ) {
        self.0.push(Fault {
            message: message.into(),
            hint: hint.into(),
            place: place.clone(),
        });
    }

    /// Notes a fault and stands for the value that is not there.
    pub(super) fn none<T>(
        &mut self,
        place: &Place,
        message: impl Into<String>,
        hint: impl Into<String>,
    ) -> Option<T> {
        self.add(place, message, hint);
        None
    }

    /// Whether nothing is wrong so far.
    pub(super) fn is_empty(&self) -> bool {
        self.0.is_empty()
    }

    /// All of them, in the order of the file.
    pub(super) fn finish(mut self, file: &str, text: &str) -> Faults {
        self.0.sort_by(|a, b| a.place.rank().cmp(&b.place.rank()));
        self.0.dedup();
        Faults {
            file: file.to_owned(),
            text: Arc::from(text),
            list: self.0,
        }
    }
}
