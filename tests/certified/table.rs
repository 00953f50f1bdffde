//! The table: what a row is, when it is at fault, and how it is printed.

use std::fmt;

pub const HEADER: &str = "statistic | reference | allowed error | worst error | over | at";

/// Half a unit in the last place: no double can be asked to be closer.
const ROUNDING: f64 = 1.2e-16;
/// An entry may be this much slacker than what is measured.
const SLACK: f64 = 10.0;

/// The worst of many comparisons.
pub struct Worst {
    error: f64,
    at: String,
    count: usize,
}

impl Worst {
    pub fn new() -> Self {
        Self {
            error: 0.0,
            at: String::from("-"),
            count: 0,
        }
    }

    /// Compares relative to the reference (absolutely where that is zero).
    pub fn relative(&mut self, got: f64, want: f64, at: impl fmt::Display) {
        let scale = if want == 0.0 { 1.0 } else { want.abs() };
        self.record((got - want).abs() / scale, at);
    }

    /// Compares with a printed figure, in halves of its last printed digit: 1 is the most that
    /// rounding explains.
    pub fn printed(&mut self, got: f64, printed: &str, at: impl fmt::Display) {
        let want: f64 = printed.parse().expect("a printed figure is a number");
        let (mantissa, exponent) = match printed.split_once('e') {
            Some((mantissa, exponent)) => (mantissa, exponent.parse().expect("an exponent")),
            None => (printed, 0),
        };
        let decimals = mantissa.split_once('.').map_or(0, |(_, d)| d.len() as i32);
        let half = 0.5 * 10.0_f64.powi(exponent - decimals);
        // The reference itself is rounded to a double: a hair of room at the boundary.
        self.record((got - want).abs() / half * (1.0 - 1e-9), at);
    }

    pub fn record(&mut self, error: f64, at: impl fmt::Display) {
        self.count += 1;
        // A NaN is the worst of all.
        if error > self.error || error.is_nan() {
            self.error = if error.is_nan() { f64::INFINITY } else { error };
            self.at = at.to_string();
        }
    }

    pub fn error(&self) -> f64 {
        self.error
    }
}

/// One row of the table.
pub struct Row {
    pub statistic: &'static str,
    /// Names of the public functions that this row exercises.
    pub covers: &'static [&'static str],
    pub source: &'static str,
    pub allowed: f64,
    pub worst: Worst,
}

impl Row {
    /// What is wrong with the row, if anything.
    pub fn fault(&self) -> Option<String> {
        let Self {
            statistic,
            source,
            allowed,
            worst,
            ..
        } = self;
        let error = worst.error;
        if worst.count == 0 {
            return Some(format!("{statistic} ({source}): nothing was compared"));
        }
        if error > *allowed {
            return Some(format!(
                "{statistic} ({source}): {error:.2e} exceeds {allowed:.0e}"
            ));
        }
        if *allowed > SLACK * error.max(ROUNDING) {
            return Some(format!(
                "{statistic} ({source}): {allowed:.0e} is stale, {error:.2e} measured"
            ));
        }
        None
    }
}

impl fmt::Display for Row {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self {
            statistic,
            source,
            allowed,
            worst,
            ..
        } = self;
        write!(
            f,
            "{statistic} | {source} | {allowed:.1e} | {:.1e} | {} | {}",
            worst.error, worst.count, worst.at
        )
    }
}
