//! Single values checked for their meaning: names, paths, durations, numbers within bounds, words.
//!
//! Each check says what is wrong once, with the key's example as the hint. A check of a key that is
//! absent or already faulty says nothing.

use std::ops::RangeInclusive;
use std::path::PathBuf;

use jiff::SpanRelativeTo;
use jiff::fmt::friendly::SpanParser;

use crate::model::{Name, Value};

use super::fault::{FaultList, Place};
use super::keys;
use super::raw::{Kind, Node};
use super::section::{Field, Spot};

/// Microseconds of a second, of which durations are written.
pub(super) const S: i64 = crate::model::US_PER_S;
/// Microseconds of a day.
pub(super) const D: i64 = crate::model::US_PER_DAY;

/// Names end in topics, addresses and on telephones.
const LONGEST_NAME: usize = 100;

/// Checks the values of one section.
pub(super) struct Check<'f> {
    section: &'static str,
    place: Place,
    faults: &'f mut FaultList,
}

impl<'f> Check<'f> {
    /// For the section with this heading.
    pub(super) fn new(section: &'static str, place: &Place, faults: &'f mut FaultList) -> Self {
        Self {
            section,
            place: place.clone(),
            faults,
        }
    }

    /// For a table inside this section.
    pub(super) fn inside(&mut self, section: &'static str, place: &Place) -> Check<'_> {
        Check::new(section, place, self.faults)
    }

    /// Notes a fault of a key, with a hint of its own.
    pub(super) fn add(
        &mut self,
        place: &Place,
        message: impl Into<String>,
        hint: impl Into<String>,
    ) {
        self.faults.add(place, message, hint);
    }

    /// Notes a fault of a key; the hint is the key's example.
    pub(super) fn wrong<T>(
        &mut self,
        place: &Place,
        name: &str,
        what: impl std::fmt::Display,
    ) -> Option<T> {
        let hint = keys::example(self.section, name);
        self.faults.none(place, format!("`{name}` {what}"), hint)
    }

    /// The field itself, after saying that it is missing when it is.
    pub(super) fn required<T>(&mut self, field: Field<T>, name: &str) -> Field<T> {
        if let Field::Absent = field {
            let title = keys::title(self.section);
            let message = format!("`{name}` is missing in {title}");
            // A section that only variables made is none of theirs to complete.
            let place = match &self.place {
                Place::Variable(_) => Place::File,
                heading => heading.clone(),
            };
            self.faults
                .add(&place, message, keys::example(self.section, name));
            return Field::Faulty;
        }
        field
    }

    /// A name: not empty, on one line, without blanks at its ends.
    pub(super) fn name(&mut self, field: Field<String>, name: &str) -> Option<Name> {
        let Spot { value, place } = field.given()?;
        match unfit(&value) {
            None => Some(Name::from(value)),
            Some(what) => self.wrong(&place, name, what),
        }
    }

    /// The path of a file or folder.
    pub(super) fn path(&mut self, field: Field<String>, name: &str) -> Option<Spot<PathBuf>> {
        let Spot { value, place } = field.given()?;
        if value.trim().is_empty() || value.contains('\0') {
            return self.wrong(&place, name, "is no path");
        }
        Some(Spot {
            value: PathBuf::from(value),
            place,
        })
    }

    /// A duration within bounds, in microseconds.
    pub(super) fn duration_us(
        &mut self,
        field: Field<String>,
        name: &str,
        bounds_us: RangeInclusive<i64>,
    ) -> Option<i64> {
        let Spot { value, place } = field.given()?;
        let Some(us) = duration_us(&value) else {
            let what =
                "is no duration: a number with its unit, such as 500ms, 30s, 5min, 2h or 10 d";
            return self.wrong(&place, name, what);
        };
        if bounds_us.contains(&us) {
            return Some(us);
        }
        let (least, most) = (words(*bounds_us.start()), words(*bounds_us.end()));
        self.wrong(&place, name, format!("must lie between {least} and {most}"))
    }

    /// A whole number within bounds.
    pub(super) fn whole<T: TryFrom<i64>>(
        &mut self,
        field: Field<i64>,
        name: &str,
        bounds: RangeInclusive<i64>,
    ) -> Option<T> {
        let Spot { value, place } = field.given()?;
        let within = bounds.contains(&value);
        match T::try_from(value) {
            Ok(number) if within => Some(number),
            _ => {
                let (least, most) = (bounds.start(), bounds.end());
                self.wrong(&place, name, format!("must lie between {least} and {most}"))
            }
        }
    }

    /// A finite number, exact.
    pub(super) fn value(&mut self, field: Field<String>, name: &str) -> Option<Spot<Value>> {
        let Spot { value, place } = field.given()?;
        match Value::parse(&value) {
            Ok(value) if value.to_f64().is_finite() => Some(Spot { value, place }),
            Ok(_) => self.wrong(&place, name, "is not a finite number"),
            Err(error) => self.wrong(&place, name, error),
        }
    }

    /// A finite number for which `good` holds.
    pub(super) fn number(
        &mut self,
        field: Field<String>,
        name: &str,
        good: impl Fn(f64) -> bool,
        wanted: &str,
    ) -> Option<Spot<f64>> {
        let Spot { value, place } = self.value(field, name)?;
        let value = value.to_f64();
        if good(value) {
            Some(Spot { value, place })
        } else {
            self.wrong(&place, name, format!("must be {wanted}"))
        }
    }

    /// A list of texts. What holds something else is told of, item by item.
    pub(super) fn texts(
        &mut self,
        field: Field<Vec<Node>>,
        name: &str,
    ) -> Option<Vec<Spot<String>>> {
        let Spot { value: list, .. } = field.given()?;
        let mut texts = Vec::with_capacity(list.len());
        let mut all_good = true;
        for Node { place, kind } in list {
            match kind {
                Kind::Text(value) => texts.push(Spot { value, place }),
                other => {
                    let what = format!("holds {} and must hold text in quotes", other.what());
                    let _: Option<()> = self.wrong(&place, name, what);
                    all_good = false;
                }
            }
        }
        all_good.then_some(texts)
    }

    /// A list of some of a few words; `what` is what they are ("kind of notice").
    pub(super) fn words<T: Clone>(
        &mut self,
        field: Field<Vec<Node>>,
        name: &str,
        what: &str,
        known: &[(&str, T)],
    ) -> Option<Vec<T>> {
        let texts = self.texts(field, name)?;
        let mut found = Vec::with_capacity(texts.len());
        let mut all_good = true;
        for Spot { value, place } in texts {
            let same = known.iter().find(|(word, _)| *word == value);
            if let Some((_, meant)) = same {
                found.push(meant.clone());
                continue;
            }
            all_good = false;
            let hint = match keys::nearest(&value, known.iter().map(|(word, _)| *word)) {
                Some(near) => format!("did you mean \"{near}\"?"),
                None if known.is_empty() => format!("take `{name}` out"),
                None => {
                    let all: Vec<_> = known
                        .iter()
                        .map(|(word, _)| format!("\"{word}\""))
                        .collect();
                    format!("there are {}", all.join(", "))
                }
            };
            let message = format!("`{name}`: there is no {what} \"{}\"", value.escape_debug());
            self.faults.add(&place, message, hint);
        }
        all_good.then_some(found)
    }

    /// One of a few words.
    pub(super) fn word<T: Copy>(
        &mut self,
        field: Field<String>,
        name: &str,
        known: &[(&str, T)],
    ) -> Option<Spot<T>> {
        let Spot { value, place } = field.given()?;
        if let Some((_, meant)) = known.iter().find(|(word, _)| *word == value) {
            return Some(Spot {
                value: *meant,
                place,
            });
        }
        let words: Vec<_> = known
            .iter()
            .map(|(word, _)| format!("\"{word}\""))
            .collect();
        let hint = match keys::nearest(&value, known.iter().map(|(word, _)| *word)) {
            Some(near) => format!("did you mean \"{near}\"?"),
            None => keys::example(self.section, name),
        };
        let message = format!("`{name}` must be {}", listed(&words));
        self.faults.none(&place, message, hint)
    }
}

/// "a, b or c".
fn listed(words: &[String]) -> String {
    match words {
        [] => String::new(),
        [one] => one.clone(),
        [most @ .., last] => format!("{} or {last}", most.join(", ")),
    }
}

/// Why a text is no name.
pub(super) fn unfit(name: &str) -> Option<String> {
    if name.trim().is_empty() {
        Some("is empty".to_owned())
    } else if name.trim() != name {
        Some("has blanks at its ends".to_owned())
    } else if name.chars().any(char::is_control) {
        Some("holds a control character".to_owned())
    } else if name.chars().count() > LONGEST_NAME {
        Some(format!("is longer than {LONGEST_NAME} characters"))
    } else {
        None
    }
}

/// Reads a duration ("30s", "1.5 s", "5min") as microseconds; a day has 24 hours. `None` when it is none.
pub fn duration_us(text: &str) -> Option<i64> {
    let span = SpanParser::new().parse_span(text.trim()).ok()?;
    let duration = span.to_duration(SpanRelativeTo::days_are_24_hours()).ok()?;
    i64::try_from(duration.as_micros()).ok()
}

/// A duration as people say it.
pub fn words(us: i64) -> String {
    const UNITS: [(i64, &str); 4] = [(D, "d"), (3600 * S, "h"), (60 * S, "min"), (S, "s")];
    for (unit, word) in UNITS {
        if us >= unit && us % unit == 0 {
            return format!("{} {word}", us / unit);
        }
    }
    format!("{} ms", us as f64 / 1000.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn durations_need_a_unit_and_know_days() {
        for (text, us) in [
            ("30s", Some(30 * S)),
            ("5min", Some(300 * S)),
            ("10 d", Some(10 * D)),
            ("1h 30min", Some(5400 * S)),
            ("1.5s", Some(1_500_000)),
            ("250ms", Some(250_000)),
            ("2 weeks", Some(14 * D)),
            ("-30s", Some(-30 * S)),
            ("30", None),
            ("", None),
            ("1 month", None),
            ("soon", None),
            ("99999999999 d", None),
        ] {
            assert_eq!(duration_us(text), us, "{text:?}");
        }
    }

    #[test]
    fn durations_are_said_in_their_largest_whole_unit() {
        for (us, wanted) in [
            (90 * S, "90 s"),
            (7 * D, "7 d"),
            (7200 * S, "2 h"),
            (1000, "1 ms"),
            (0, "0 ms"),
        ] {
            assert_eq!(words(us), wanted);
        }
    }
}
