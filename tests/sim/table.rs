//! What a row of the proof is, how its figures are judged, and how the table is printed.

use std::fmt;

use super::crew::{Crew, Runs};
use super::measure::Measure;

/// Which form runs.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Form {
    /// Minutes: a test.
    Short,
    /// Hours: a benchmark.
    Full,
}

/// Where a figure should lie.
#[derive(Clone, Copy, Debug)]
pub enum Bound {
    AtMost(f64),
    AtLeast(f64),
    Within(f64, f64),
    /// Told, and not judged.
    Anything,
}

impl Bound {
    fn holds(self, value: f64) -> bool {
        match self {
            Self::AtMost(most) => value <= most,
            Self::AtLeast(least) => value >= least,
            Self::Within(low, high) => (low..=high).contains(&value),
            Self::Anything => true,
        }
    }
}

impl fmt::Display for Bound {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::AtMost(most) => write!(f, "≤ {most}"),
            Self::AtLeast(least) => write!(f, "≥ {least}"),
            Self::Within(low, high) => write!(f, "{low} to {high}"),
            Self::Anything => f.write_str("–"),
        }
    }
}

/// A figure that a measure brings, and what is asked of it.
#[derive(Clone, Debug)]
pub struct Asked {
    pub name: &'static str,
    /// The test fails beyond this; chance alone must not, a wrong engine must.
    pub short: Bound,
    pub solid: Bound,
    pub aim: Bound,
}

/// A row: what is simulated, how often, and what is asked of each figure.
pub struct Row {
    pub what: &'static str,
    pub case: String,
    pub measure: Measure,
    /// Runs in the short and in the full form; 0 leaves the row out.
    pub runs: [usize; 2],
    pub asked: Vec<Asked>,
}

impl Row {
    pub fn runs(&self, form: Form) -> usize {
        self.runs[usize::from(form == Form::Full)]
    }

    fn seed(&self) -> u64 {
        // FNV-1a over what names the row, so that a row does not depend on its neighbours.
        let name = self.what.bytes().chain(self.case.bytes());
        name.fold(0xcbf2_9ce4_8422_2325, |h, b| {
            (h ^ u64::from(b)).wrapping_mul(0x0100_0000_01b3)
        })
    }

    /// Measures the row.
    pub fn judge(&self, form: Form, crew: &Crew) -> Vec<Judged> {
        let seed = self.seed();
        let figures = self.measure.take(&Runs {
            count: self.runs(form),
            seed,
            crew,
        });
        assert_eq!(figures.len(), self.asked.len(), "{}", self.what);
        let pairs = self.asked.iter().zip(figures);
        pairs
            .map(|(asked, figure)| Judged {
                what: self.what,
                case: self.case.clone(),
                seed,
                form,
                asked: asked.clone(),
                figure,
            })
            .collect()
    }
}

/// A measured figure.
#[derive(Clone, Copy, Debug)]
pub struct Figure {
    pub value: f64,
    /// Standard error.
    pub error: f64,
    /// What it rests on: runs, or calls where a rate was counted.
    pub count: usize,
}

impl Figure {
    /// Mean of independent values with its standard error.
    pub fn mean(values: &[f64]) -> Self {
        let n = values.len() as f64;
        let mean = values.iter().sum::<f64>() / n;
        let squares: f64 = values.iter().map(|v| (v - mean).powi(2)).sum();
        Self {
            value: mean,
            error: (squares / (n - 1.0).max(1.0) / n).sqrt(),
            count: values.len(),
        }
    }

    /// Share of runs in which something holds.
    pub fn share(holds: &[bool]) -> Self {
        let n = holds.len() as f64;
        let share = holds.iter().filter(|h| **h).count() as f64 / n;
        Self {
            value: share,
            // With a run more of each kind, so that all or none is not taken for certainty.
            error: ((share * n + 1.0) * ((1.0 - share) * n + 1.0) / (n + 2.0).powi(3)).sqrt(),
            count: holds.len(),
        }
    }

    /// A quotient of two independent figures.
    pub fn over(self, by: Self) -> Self {
        let value = self.value / by.value;
        let relative = (self.error / self.value).hypot(by.error / by.value);
        Self {
            value,
            error: (value * relative).abs(),
            count: self.count,
        }
    }

    pub fn times(self, by: f64) -> Self {
        Self {
            value: self.value * by,
            error: self.error * by,
            ..self
        }
    }
}

/// A row's figure beside what is asked.
pub struct Judged {
    what: &'static str,
    case: String,
    seed: u64,
    form: Form,
    asked: Asked,
    figure: Figure,
}

/// The head of the table, in Markdown.
pub const HEADER: &str = "\
| what | case | figure | measured | ± | from | solid | aim | verdict | seed |
| --- | --- | --- | ---: | ---: | ---: | --- | --- | --- | --- |";

impl Judged {
    /// Whether the test (short form) or the claim (full form) fails. What is solid in the full form is
    /// allowed two standard errors.
    pub fn fails(&self) -> bool {
        match self.form {
            Form::Short => !self.asked.short.holds(self.figure.value),
            Form::Full => !self.solid_within(2.0),
        }
    }

    fn solid_within(&self, errors: f64) -> bool {
        let (value, room) = (self.figure.value, errors * self.figure.error);
        let near = [value - room, value, value + room];
        near.iter().any(|v| self.asked.solid.holds(*v))
    }

    fn verdict(&self) -> &'static str {
        let value = self.figure.value;
        let by_itself = if matches!(self.asked.solid, Bound::Anything) {
            "told"
        } else if self.asked.aim.holds(value) {
            "aim"
        } else if self.asked.solid.holds(value) {
            "solid"
        } else if self.solid_within(2.0) {
            "solid within 2 ±"
        } else {
            "misses solid"
        };
        if self.form == Form::Short && self.fails() {
            "FAILED"
        } else {
            by_itself
        }
    }
}

impl fmt::Display for Judged {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let places = if self.figure.value.abs() >= 100.0 {
            1
        } else {
            3
        };
        write!(
            f,
            "| {} | {} | {} | {:.places$} | {:.places$} | {} | {} | {} | {} | {:016x} |",
            self.what,
            self.case,
            self.asked.name,
            self.figure.value,
            self.figure.error,
            self.figure.count,
            self.asked.solid,
            self.asked.aim,
            self.verdict(),
            self.seed
        )
    }
}
