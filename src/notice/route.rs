//! Which notices go to which outlet, and from when on.
//!
//! A notice goes to an outlet when it is unacknowledged, of a kind, bank and priority that belong there,
//! has stood as long as `escalate_after` says, and one of the outlet's shifts is on. Once it is there,
//! the outlet hears of it until it is over, whoever is on shift then: whoever was called is also told
//! that all is well. Deliberately absent: what has been told already (that is `engine`), and sending.

use jiff::tz::TimeZone;

use crate::model::{Name, Shift, Time};

use super::{Kind, Notice, Priority, State};

/// Where an outlet's notices come from. An empty list means all.
#[derive(Clone, Debug, PartialEq)]
pub struct Route {
    /// The outlet.
    pub outlet: Name,
    /// The banks.
    pub banks: Vec<Name>,
    /// The kinds.
    pub kinds: Vec<Kind>,
    /// The priorities.
    pub priorities: Vec<Priority>,
    /// The shifts during which a notice can begin to go there.
    pub shifts: Vec<Shift>,
    /// How long a notice must stand unacknowledged, in microseconds.
    pub escalate_after_us: i64,
    /// What is sent again.
    pub updates: Updates,
}

/// What is sent again of a notice that an outlet has.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Updates {
    /// Another state, priority or set of sources.
    States,
    /// That, and figures that have moved by more than half their interval.
    All,
}

impl Route {
    /// Whether a notice that the outlet does not have goes there now.
    pub fn takes(&self, notice: &Notice, zone: &TimeZone, now: Time) -> bool {
        self.next(notice, zone, now) == Some(now)
    }

    /// The first moment at or after `now` at which the notice goes there, if it stays as it is; `None`
    /// when it never will.
    pub fn next(&self, notice: &Notice, zone: &TimeZone, now: Time) -> Option<Time> {
        let belongs = notice.state == State::Unacknowledged
            && has(&self.banks, &notice.bank)
            && has(&self.kinds, &notice.kind)
            && has(&self.priorities, &notice.priority);
        if !belongs {
            return None;
        }
        let earliest = notice.raised.plus_us(self.escalate_after_us).max(now);
        if self.shifts.is_empty() {
            return Some(earliest);
        }
        let on = self.shifts.iter();
        on.filter_map(|shift| shift.next_on(zone, earliest)).min()
    }

    /// Whether an outlet that has the notice is told of this change.
    pub fn wants(&self, before: &Notice, now: &Notice) -> bool {
        self.updates == Updates::All || is_more_than_figures(before, now)
    }
}

fn has<T: PartialEq>(list: &[T], one: &T) -> bool {
    list.is_empty() || list.contains(one)
}

/// Whether state, priority or the set of sources differ.
fn is_more_than_figures(before: &Notice, now: &Notice) -> bool {
    let set = |n: &Notice| {
        let mut names: Vec<Name> = n.sources.iter().map(|s| s.source.clone()).collect();
        names.sort();
        names
    };
    before.state != now.state || before.priority != now.priority || set(before) != set(now)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::notice::{NamedSource, Since};

    fn at(minute: i64) -> Time {
        // 2026-01-07T05:30:00Z and so many minutes.
        Time::from_us(1_767_763_800_000_000).plus_us(minute * 60_000_000)
    }

    fn notice() -> Notice {
        let named = |source: &str| NamedSource {
            source: source.into(),
            deviation: -1.2,
            low: -1.5,
            high: -0.9,
        };
        Notice {
            id: "filler-2-2026-0001".into(),
            plant: "Quayside".into(),
            bank: "filler-2".into(),
            kind: Kind::LevelApart,
            state: State::Unacknowledged,
            priority: Priority::Medium,
            sources: vec![named("07"), named("08")],
            unit: "g".into(),
            since: Since {
                at: at(0),
                earliest: at(0),
                latest: at(0),
            },
            raised: at(0),
            changed: at(0),
            returned: None,
            acknowledged: None,
            subject: String::new(),
            text: String::new(),
            advice: String::new(),
            url: String::new(),
            span: 40,
            handling: crate::notice::Handling::default(),
            pattern: None,
            slip: None,
            common_movement: None,
            even_mean: None,
            cost_per_hour: None,
            adjustment: None,
        }
    }

    fn route() -> Route {
        Route {
            outlet: "phone".into(),
            banks: Vec::new(),
            kinds: Vec::new(),
            priorities: Vec::new(),
            shifts: Vec::new(),
            escalate_after_us: 0,
            updates: Updates::States,
        }
    }

    fn shift(from: i8, to: i8) -> Shift {
        Shift {
            name: "a".into(),
            from: jiff::civil::Time::constant(from, 0, 0, 0),
            to: jiff::civil::Time::constant(to, 0, 0, 0),
        }
    }

    /// When a notice raised at minute 0 goes there, asked at minute `now`.
    #[track_caller]
    fn check(what: &str, route: &Route, notice: &Notice, now: i64, wanted: Option<i64>) {
        let next = route.next(notice, &TimeZone::UTC, at(now));
        assert_eq!(next, wanted.map(at), "{what}");
        let takes = route.takes(notice, &TimeZone::UTC, at(now));
        assert_eq!(takes, wanted == Some(now), "{what}");
    }

    #[test]
    fn lists_let_through_what_they_hold_and_empty_ones_everything() {
        let n = notice();
        let mut r = route();
        check("no lists", &r, &n, 3, Some(3));
        r.banks = vec!["filler-1".into()];
        check("another bank", &r, &n, 3, None);
        r.banks.push("filler-2".into());
        r.kinds = vec![Kind::SpreadApart];
        check("another kind", &r, &n, 3, None);
        r.kinds.push(Kind::LevelApart);
        r.priorities = vec![Priority::High];
        check("another priority", &r, &n, 3, None);
        r.priorities.push(Priority::Medium);
        check("all of it", &r, &n, 3, Some(3));
    }

    #[test]
    fn only_what_is_unacknowledged_begins_to_go_anywhere() {
        for state in [
            State::Normal,
            State::Acknowledged,
            State::ReturnedUnacknowledged,
            State::Shelved,
            State::Suppressed,
            State::OutOfService,
        ] {
            let n = Notice { state, ..notice() };
            check(state.word(), &route(), &n, 3, None);
        }
    }

    #[test]
    fn an_escalation_waits_and_a_shift_is_waited_for() {
        let n = notice();
        let mut r = route();
        r.escalate_after_us = 10 * 60_000_000;
        check("not long enough", &r, &n, 9, Some(10));
        check("long enough", &r, &n, 10, Some(10));
        check("for long", &r, &n, 500, Some(500));
        // Minute 30 is six o'clock.
        r.shifts = vec![shift(6, 14)];
        check("before the shift", &r, &n, 12, Some(30));
        check("in it", &r, &n, 31, Some(31));
        check("after it", &r, &n, 8 * 60 + 30, Some(24 * 60 + 30));
        r.escalate_after_us = 45 * 60_000_000;
        check("both", &r, &n, 12, Some(45));
        r.shifts.push(shift(22, 6));
        r.escalate_after_us = 0;
        check("one of several", &r, &n, 12, Some(12));
    }

    #[test]
    fn figures_alone_are_sent_again_only_where_they_are_wanted() {
        let before = notice();
        let mut moved = notice();
        moved.sources[0].deviation = -2.0;
        moved.sources.swap(0, 1);
        let mut joined = notice();
        joined.sources.truncate(1);
        let mut higher = notice();
        higher.priority = Priority::High;
        let mut seen = notice();
        seen.state = State::Acknowledged;
        let mut r = route();
        for (now, states) in [(moved, false), (joined, true), (higher, true), (seen, true)] {
            r.updates = Updates::States;
            assert_eq!(r.wants(&before, &now), states);
            r.updates = Updates::All;
            assert!(r.wants(&before, &now));
        }
    }
}
