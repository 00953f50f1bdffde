//! Shifts by the clock on the wall, as stretches of real time.
//!
//! A shift is given in hours and minutes and held against instants, so the days on which the clocks
//! are changed need care: a start that the clocks jump over is the moment of the jump, one that comes
//! twice is its first coming, and the same holds for ends. So shifts that follow each other on the
//! wall follow each other in time, without a gap and without an overlap.

use jiff::civil::{Date, Time as WallTime};
use jiff::tz::{AmbiguousOffset, TimeZone};

use super::{Name, Time};

/// A shift by the clock on the wall; one that ends at or before its start ends the next day.
#[derive(Clone, Debug, PartialEq)]
pub struct Shift {
    /// Its name.
    pub name: Name,
    /// Start.
    pub from: WallTime,
    /// End.
    pub to: WallTime,
}

impl Shift {
    /// Whether it is on at this time: from its start on, up to and without its end.
    pub fn is_on(&self, zone: &TimeZone, at: Time) -> bool {
        self.running(zone, at).is_some()
    }

    /// The day on which the shift began that is on at this time, with its start and end.
    pub fn running(&self, zone: &TimeZone, at: Time) -> Option<(Date, (Time, Time))> {
        let day = day_of(zone, at)?;
        let began = [day.yesterday().ok(), Some(day)].into_iter().flatten();
        let mut stretches = began.filter_map(|day| Some((day, self.stretch(zone, day)?)));
        stretches.find(|(_, (from, to))| *from <= at && at < *to)
    }

    /// Whether some time of day belongs to both.
    pub fn overlaps(&self, other: &Self) -> bool {
        self.holds(other.from) || other.holds(self.from)
    }

    /// Whether the clock on the wall shows this time of day during the shift.
    fn holds(&self, clock: WallTime) -> bool {
        if self.from < self.to {
            self.from <= clock && clock < self.to
        } else {
            clock >= self.from || clock < self.to
        }
    }

    /// The first moment at or after this time at which it is on. Without one only at the end of all
    /// calendars.
    pub fn next_on(&self, zone: &TimeZone, at: Time) -> Option<Time> {
        if self.is_on(zone, at) {
            return Some(at);
        }
        let day = day_of(zone, at)?;
        // A stretch that the clocks jump over altogether has no length, so a third day may be needed.
        let days = [Some(day), day.tomorrow().ok()];
        let later = day.tomorrow().ok().and_then(|d| d.tomorrow().ok());
        let starts = days.into_iter().chain([later]).flatten();
        starts
            .filter_map(|day| self.stretch(zone, day))
            .find(|(from, to)| *from >= at && from < to)
            .map(|(from, _)| from)
    }

    /// Start and end of the shift that begins on this day.
    pub fn stretch(&self, zone: &TimeZone, day: Date) -> Option<(Time, Time)> {
        let last = if self.to <= self.from {
            day.tomorrow().ok()?
        } else {
            day
        };
        Some((moment(zone, day, self.from)?, moment(zone, last, self.to)?))
    }
}

/// The day on the wall.
fn day_of(zone: &TimeZone, at: Time) -> Option<Date> {
    Some(zone.to_datetime(at.to_jiff()?).date())
}

/// When the clock on the wall first shows this, or jumps over it.
fn moment(zone: &TimeZone, day: Date, clock: WallTime) -> Option<Time> {
    let shown = zone.to_ambiguous_timestamp(day.to_datetime(clock));
    let is_jumped_over = matches!(shown.offset(), AmbiguousOffset::Gap { .. });
    let first = shown.compatible().ok()?;
    let jump = || zone.preceding(first).next().map(|t| t.timestamp());
    let moment = if is_jumped_over { jump()? } else { first };
    Some(Time::from_us(moment.as_microsecond()))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn shift(from: (i8, i8), to: (i8, i8)) -> Shift {
        let wall = |(hour, minute)| WallTime::constant(hour, minute, 0, 0);
        Shift {
            name: "a".into(),
            from: wall(from),
            to: wall(to),
        }
    }

    fn at(text: &str) -> Time {
        Time::parse_rfc3339(text).expect("a time")
    }

    fn lisbon() -> TimeZone {
        TimeZone::get("Europe/Lisbon").expect("bundled")
    }

    /// Whether it is on, and when it is on next.
    #[track_caller]
    fn check(shift: &Shift, now: &str, next: &str) {
        let zone = lisbon();
        assert_eq!(shift.is_on(&zone, at(now)), now == next, "{now}");
        assert_eq!(shift.next_on(&zone, at(now)), Some(at(next)), "{now}");
    }

    #[test]
    fn a_shift_holds_its_start_and_not_its_end() {
        let early = shift((6, 0), (14, 0));
        // Lisbon is on UTC in winter and an hour ahead in summer.
        check(&early, "2026-01-07T06:00:00Z", "2026-01-07T06:00:00Z");
        check(&early, "2026-01-07T13:59:59Z", "2026-01-07T13:59:59Z");
        check(&early, "2026-01-07T14:00:00Z", "2026-01-08T06:00:00Z");
        check(&early, "2026-01-07T05:59:59Z", "2026-01-07T06:00:00Z");
        check(&early, "2026-07-07T05:00:00Z", "2026-07-07T05:00:00Z");
        check(&early, "2026-07-07T13:00:00Z", "2026-07-08T05:00:00Z");
    }

    #[test]
    fn a_night_shift_goes_over_midnight_and_a_whole_day_is_always_on() {
        let night = shift((22, 0), (6, 0));
        check(&night, "2026-01-07T23:30:00Z", "2026-01-07T23:30:00Z");
        check(&night, "2026-01-08T05:59:00Z", "2026-01-08T05:59:00Z");
        check(&night, "2026-01-08T06:00:00Z", "2026-01-08T22:00:00Z");
        let day = shift((6, 0), (6, 0));
        check(&day, "2026-01-08T05:59:59Z", "2026-01-08T05:59:59Z");
        check(&day, "2026-01-08T06:00:00Z", "2026-01-08T06:00:00Z");
    }

    #[test]
    fn shifts_overlap_when_they_share_a_time_of_day() {
        for (one, other, wanted) in [
            (((6, 0), (14, 0)), ((14, 0), (22, 0)), false),
            (((6, 0), (14, 0)), ((13, 59), (22, 0)), true),
            (((6, 0), (14, 0)), ((8, 0), (9, 0)), true),
            (((22, 0), (6, 0)), ((6, 0), (22, 0)), false),
            (((22, 0), (6, 0)), ((5, 0), (9, 0)), true),
            (((22, 0), (6, 0)), ((23, 0), (4, 0)), true),
            (((6, 0), (6, 0)), ((1, 0), (2, 0)), true),
            (((6, 0), (14, 0)), ((6, 0), (14, 0)), true),
        ] {
            let (a, b) = (shift(one.0, one.1), shift(other.0, other.1));
            assert_eq!(a.overlaps(&b), wanted, "{a:?} {b:?}");
            assert_eq!(b.overlaps(&a), wanted, "{b:?} {a:?}");
        }
    }

    #[test]
    fn the_days_on_which_the_clocks_are_changed_leave_no_gap_and_no_overlap() {
        // 2026-03-29, 01:00 UTC: from 01:00 to 02:00. 2026-10-25, 01:00 UTC: from 02:00 back to 01:00.
        let starts_in_jump = shift((1, 30), (9, 0));
        check(
            &starts_in_jump,
            "2026-03-29T00:59:59Z",
            "2026-03-29T01:00:00Z",
        );
        check(
            &starts_in_jump,
            "2026-03-29T01:10:00Z",
            "2026-03-29T01:10:00Z",
        );
        let lost = shift((1, 10), (1, 50));
        check(&lost, "2026-03-29T00:30:00Z", "2026-03-30T00:10:00Z");
        // The second 01:00 to 01:30 belongs to the shift that began at the first 01:30.
        check(
            &starts_in_jump,
            "2026-10-25T01:10:00Z",
            "2026-10-25T01:10:00Z",
        );
        let (one, other) = (shift((13, 15), (1, 15)), shift((1, 15), (13, 15)));
        let zone = lisbon();
        for day in ["2026-03-29", "2026-10-25"] {
            for minute in 0..24 * 60 {
                let now = at(&format!("{day}T00:00:00Z")).plus_us(minute * 60_000_000);
                assert_ne!(one.is_on(&zone, now), other.is_on(&zone, now), "{now}");
            }
        }
    }
}
