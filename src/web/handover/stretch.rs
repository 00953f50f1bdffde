//! Which shift is meant, as a stretch of real time.

use jiff::civil::{Date, Time as WallTime};
use jiff::tz::TimeZone;

use crate::model::{Name, Shift, Time};

/// What is asked for.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Wanted {
    /// The shift's name; without it the whole day where a date is given, else the newest shift.
    pub shift: Option<String>,
    /// The day on which it began, as `2026-03-29`; without it the newest.
    pub date: Option<String>,
}

/// A shift of a day.
#[derive(Clone, Debug, PartialEq)]
pub struct Stretch {
    /// Its name.
    pub name: Name,
    /// The day on which it began.
    pub date: Date,
    /// Its start.
    pub from: Time,
    /// Its end.
    pub to: Time,
}

/// The shift that is asked for.
///
/// # Errors
/// What is wrong with the question.
pub fn which(
    shifts: &[Shift],
    zone: &TimeZone,
    wanted: &Wanted,
    now: Time,
) -> Result<Stretch, String> {
    let day = Shift {
        name: "day".into(),
        from: WallTime::midnight(),
        to: WallTime::midnight(),
    };
    let among: Vec<&Shift> = match &wanted.shift {
        Some(name) => vec![named(shifts, name)?],
        None if shifts.is_empty() || wanted.date.is_some() => vec![&day],
        None => shifts.iter().collect(),
    };
    let days = match &wanted.date {
        Some(text) => {
            let read = text.parse::<Date>();
            vec![read.map_err(|_| format!("\"{text}\" is no date; write it as 2026-03-29"))?]
        }
        None => {
            let stamp = now.to_jiff().ok_or("now is beyond all calendars")?;
            let today = zone.to_datetime(stamp).date();
            [Some(today), today.yesterday().ok()]
                .into_iter()
                .flatten()
                .collect()
        }
    };
    let stretch = |shift: &Shift, date: Date| {
        let (from, to) = shift.stretch(zone, date)?;
        let name = shift.name.clone();
        Some(Stretch {
            name,
            date,
            from,
            to,
        })
    };
    let all = days
        .iter()
        .flat_map(|day| among.iter().filter_map(|s| stretch(s, *day)));
    let begun = all.filter(|s| s.from <= now);
    begun
        .max_by_key(|s| s.from)
        .ok_or_else(|| "that shift has not begun yet".to_owned())
}

fn named<'s>(shifts: &'s [Shift], name: &str) -> Result<&'s Shift, String> {
    let found = shifts.iter().find(|s| *s.name == *name);
    found.ok_or_else(|| {
        let names: Vec<&str> = shifts.iter().map(|s| &*s.name).collect();
        match names.as_slice() {
            [] => format!("there is no shift \"{name}\": the plant has none ([[plant.shift]])"),
            names => format!(
                "there is no shift \"{name}\"; there are: {}",
                names.join(", ")
            ),
        }
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn shifts() -> Vec<Shift> {
        let wall = |hour| WallTime::constant(hour, 0, 0, 0);
        let shift = |name: &str, from, to| Shift {
            name: name.into(),
            from: wall(from),
            to: wall(to),
        };
        vec![
            shift("early", 6, 14),
            shift("late", 14, 22),
            shift("night", 22, 6),
        ]
    }

    /// The stretch as `name date from to`, or the complaint.
    #[track_caller]
    fn check(shift: Option<&str>, date: Option<&str>, now: &str, expected: &str) {
        let zone = TimeZone::get("Europe/Lisbon").expect("bundled");
        let wanted = Wanted {
            shift: shift.map(str::to_owned),
            date: date.map(str::to_owned),
        };
        let now = Time::parse_rfc3339(now).expect("a time");
        let got = match which(&shifts(), &zone, &wanted, now) {
            Ok(s) => format!("{} {} {} {}", s.name, s.date, s.from, s.to),
            Err(why) => why,
        };
        assert!(got.contains(expected), "{got} is not {expected}");
    }

    #[test]
    fn the_newest_shift_or_the_one_asked_for() {
        let now = "2026-01-07T15:00:00Z";
        check(None, None, now, "late 2026-01-07 2026-01-07T14:00:00Z");
        check(Some("early"), None, now, "early 2026-01-07");
        // The night that ended this morning began yesterday.
        check(
            Some("night"),
            None,
            now,
            "night 2026-01-06 2026-01-06T22:00:00Z 2026-01-07T06:00:00Z",
        );
        check(
            Some("night"),
            Some("2026-01-05"),
            now,
            "2026-01-05T22:00:00Z 2026-01-06T06:00:00Z",
        );
        check(Some("noon"), None, now, "there are: early, late, night");
        check(None, Some("7 Jan"), now, "is no date");
        check(Some("late"), Some("2026-01-08"), now, "has not begun");
    }

    #[test]
    fn days_of_23_and_25_hours_are_whole() {
        let now = "2026-12-01T00:00:00Z";
        // Lisbon: 2026-03-29 has 23 hours, 2026-10-25 has 25.
        check(
            None,
            Some("2026-03-29"),
            now,
            "day 2026-03-29 2026-03-29T00:00:00Z 2026-03-29T23:00:00Z",
        );
        check(
            None,
            Some("2026-10-25"),
            now,
            "day 2026-10-25 2026-10-24T23:00:00Z 2026-10-26T00:00:00Z",
        );
        check(
            Some("night"),
            Some("2026-03-28"),
            now,
            "2026-03-28T22:00:00Z 2026-03-29T05:00:00Z",
        );
    }
}
