//! Which shift of which production day a moment belongs to, where the shifts are what is compared.
//!
//! A production day is numbered by the date on which its shift began, by the clock on the wall: what a
//! night shift makes after midnight belongs to the day before. Several `Shift`s of one name are one
//! shift with pauses; it begins with the first of them as written. Days of 23 and 25 hours need nothing
//! of their own, since [`Shift::stretch`] knows them.
//! What must hold: shifts do not overlap ([`Shift::overlaps`]; the settings see to it).

use jiff::civil::Date;
use jiff::tz::TimeZone;

use super::{Name, Shift, Time};

/// Day 0 of the production days.
const EPOCH: Date = Date::constant(1970, 1, 1);

/// The shifts of a plant by name, held against its clock.
#[derive(Clone, Debug, PartialEq)]
pub struct Calendar {
    zone: TimeZone,
    shifts: Vec<Whole>,
}

/// One shift with all its parts.
#[derive(Clone, Debug, PartialEq)]
struct Whole {
    name: Name,
    /// Each with the days from the shift's begin to the day on which the part begins.
    parts: Vec<(Shift, i64)>,
}

/// An uninterrupted part of a shift.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Stretch {
    /// Which shift, by its place in [`Calendar::names`].
    pub shift: usize,
    /// The production day: days from 1970-01-01 to the date on which the shift began.
    pub day: i64,
    /// The start of this part.
    pub from: Time,
    /// Its end, which is no longer in it.
    pub to: Time,
}

impl Calendar {
    /// The shifts as written; those of one name are one.
    pub fn new(shifts: &[Shift], zone: TimeZone) -> Self {
        let mut all: Vec<Whole> = Vec::new();
        for part in shifts {
            match all.iter_mut().find(|whole| whole.name == part.name) {
                Some(whole) => {
                    let first = whole.parts.first().map(|(first, _)| first.from);
                    let next_day = first.is_some_and(|first| part.from < first);
                    whole.parts.push((part.clone(), i64::from(next_day)));
                }
                None => all.push(Whole {
                    name: part.name.clone(),
                    parts: vec![(part.clone(), 0)],
                }),
            }
        }
        Self { zone, shifts: all }
    }

    /// The names of the shifts, in the order written.
    pub fn names(&self) -> impl ExactSizeIterator<Item = &Name> {
        self.shifts.iter().map(|whole| &whole.name)
    }

    /// Which shift runs at this time; `None` outside all of them.
    pub fn at(&self, at: Time) -> Option<Stretch> {
        let whole = self.shifts.iter().enumerate();
        let mut parts =
            whole.flat_map(|(s, w)| w.parts.iter().map(move |(p, later)| (s, p, later)));
        parts.find_map(|(shift, part, later)| {
            let (began, (from, to)) = part.running(&self.zone, at)?;
            let day = number(began)? - later;
            Some(Stretch {
                shift,
                day,
                from,
                to,
            })
        })
    }

    /// When the last part of a day's shift ends. `None` for a shift that is not there, and at the end of
    /// all calendars.
    pub fn end(&self, shift: usize, day: i64) -> Option<Time> {
        let parts = self.shifts.get(shift)?.parts.iter();
        let ends = parts.filter_map(|(part, later)| {
            let (_, to) = part.stretch(&self.zone, date(day.checked_add(*later)?)?)?;
            Some(to)
        });
        ends.max()
    }
}

/// Days from 1970-01-01 to a date.
fn number(date: Date) -> Option<i64> {
    Some(i64::from(EPOCH.until(date).ok()?.get_days()))
}

/// The date of a day's number.
fn date(day: i64) -> Option<Date> {
    EPOCH
        .checked_add(jiff::Span::new().try_days(day).ok()?)
        .ok()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn shift(name: &str, from: i8, to: i8) -> Shift {
        let wall = |hour| jiff::civil::Time::constant(hour, 0, 0, 0);
        Shift {
            name: name.into(),
            from: wall(from),
            to: wall(to),
        }
    }

    /// Which shift and which day ("early 2026-03-29"), and when that shift is over.
    #[track_caller]
    fn check(shifts: &[Shift], now: &str, wanted: Option<(&str, &str)>) {
        let zone = TimeZone::get("Europe/Lisbon").expect("bundled");
        let calendar = Calendar::new(shifts, zone);
        let time = Time::parse_rfc3339(now).expect("a time");
        let found = calendar.at(time).map(|s| {
            assert!(s.from <= time && time < s.to, "{now}: {s:?}");
            let name = calendar.names().nth(s.shift).expect("it is there");
            let end = calendar.end(s.shift, s.day).expect("it ends");
            assert!(s.to <= end, "{now}: {s:?} ends {end}");
            let day = date(s.day).expect("a date");
            (format!("{name} {day}"), end.to_string())
        });
        let wanted = wanted.map(|(what, end)| (what.to_owned(), end.to_owned()));
        assert_eq!(found, wanted, "{now}");
    }

    #[test]
    #[rustfmt::skip]
    fn a_moment_belongs_to_a_shift_of_a_day() {
        let three = [shift("early", 6, 14), shift("late", 14, 22), shift("night", 22, 6)];
        for (now, what, end) in [
            // Lisbon is on UTC in winter and an hour ahead in summer.
            ("2026-01-07T06:00:00Z", "early 2026-01-07", "2026-01-07T14:00:00Z"),
            ("2026-01-07T13:59:59Z", "early 2026-01-07", "2026-01-07T14:00:00Z"),
            ("2026-01-07T14:00:00Z", "late 2026-01-07", "2026-01-07T22:00:00Z"),
            ("2026-01-07T23:00:00Z", "night 2026-01-07", "2026-01-08T06:00:00Z"),
            ("2026-01-08T05:59:59Z", "night 2026-01-07", "2026-01-08T06:00:00Z"),
            ("2026-07-07T05:00:00Z", "early 2026-07-07", "2026-07-07T13:00:00Z"),
            ("2026-07-07T04:59:59Z", "night 2026-07-06", "2026-07-07T05:00:00Z"),
            // A night of seven hours, and one of nine; the days of 23 and 25 hours.
            ("2026-03-28T22:00:00Z", "night 2026-03-28", "2026-03-29T05:00:00Z"),
            ("2026-03-29T04:59:59Z", "night 2026-03-28", "2026-03-29T05:00:00Z"),
            ("2026-03-29T05:00:00Z", "early 2026-03-29", "2026-03-29T13:00:00Z"),
            ("2026-03-29T21:00:00Z", "night 2026-03-29", "2026-03-30T05:00:00Z"),
            ("2026-10-24T21:00:00Z", "night 2026-10-24", "2026-10-25T06:00:00Z"),
            ("2026-10-25T01:30:00Z", "night 2026-10-24", "2026-10-25T06:00:00Z"),
            ("2026-10-25T05:59:59Z", "night 2026-10-24", "2026-10-25T06:00:00Z"),
            ("2026-10-25T06:00:00Z", "early 2026-10-25", "2026-10-25T14:00:00Z"),
            // Before 1970.
            ("1969-12-31T09:00:00Z", "early 1969-12-31", "1969-12-31T13:00:00Z"),
        ] {
            check(&three, now, Some((what, end)));
        }
        let gap = [shift("early", 6, 14), shift("late", 15, 22)];
        for now in ["2026-01-07T14:30:00Z", "2026-01-07T22:00:00Z", "2026-01-07T05:59:59Z"] {
            check(&gap, now, None);
        }
    }

    #[test]
    #[rustfmt::skip]
    fn shifts_of_one_name_are_one_shift() {
        let split = [shift("a", 6, 10), shift("b", 10, 14), shift("a", 14, 18), shift("b", 18, 22)];
        for (now, what, end) in [
            ("2026-01-07T07:00:00Z", "a 2026-01-07", "2026-01-07T18:00:00Z"),
            ("2026-01-07T17:00:00Z", "a 2026-01-07", "2026-01-07T18:00:00Z"),
            ("2026-01-07T12:00:00Z", "b 2026-01-07", "2026-01-07T22:00:00Z"),
        ] {
            check(&split, now, Some((what, end)));
        }
        // It begins at 22:00, so what follows after midnight belongs to the day before.
        let night = [shift("day", 6, 22), shift("night", 22, 2), shift("night", 3, 6)];
        for now in ["2026-01-07T22:00:00Z", "2026-01-08T01:00:00Z", "2026-01-08T03:00:00Z"] {
            check(&night, now, Some(("night 2026-01-07", "2026-01-08T06:00:00Z")));
        }
        check(&night, "2026-01-08T02:30:00Z", None);
        // In the night on which the clocks go forward the first part loses its last hour; nothing else.
        check(&night, "2026-03-29T00:59:59Z", Some(("night 2026-03-28", "2026-03-29T05:00:00Z")));
        check(&night, "2026-03-29T02:00:00Z", Some(("night 2026-03-28", "2026-03-29T05:00:00Z")));
    }
}
