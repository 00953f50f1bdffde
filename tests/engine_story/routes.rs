//! Which outlet hears of a notice, when, and what a crash leaves of that.

use evenrow::engine::{Command, Effect, Event, Record, Ticket, Turn};
use evenrow::model::{Name, Shift, US_PER_S};
use evenrow::notice::{Deed, Priority, Route, State, Updates};

use crate::line::{Line, bank, even};

fn route(outlet: &str, escalate_after_s: i64) -> Route {
    Route {
        outlet: outlet.into(),
        banks: Vec::new(),
        kinds: Vec::new(),
        priorities: Vec::new(),
        shifts: Vec::new(),
        escalate_after_us: escalate_after_s * US_PER_S,
        updates: Updates::States,
    }
}

fn low(s: usize, _: i64) -> (f64, f64) {
    (if s == 2 { -3.0 } else { 0.0 }, 1.0)
}

/// A line on which head 2 has just been called.
fn called(routes: Vec<Route>) -> Line {
    let mut line = Line::with_routes(bank(5), 1, routes);
    line.run(300, even);
    for _ in 0..240 {
        if !line.raised().is_empty() {
            return line;
        }
        line.run(1, low);
    }
    panic!("nothing was raised");
}

/// What went to a way, as seconds since the call and states.
fn sent(line: &Line, way: &str) -> Vec<(i64, State)> {
    let all = line.effects.iter().filter_map(|e| match e {
        Effect::Deliver(d) if d.way.name() == way => Some(d),
        _ => None,
    });
    let one = |d: &evenrow::notice::Delivery| {
        let after = d.at.us_since(d.notice.raised).div_euclid(US_PER_S);
        (after, d.notice.state)
    };
    all.map(one).collect()
}

fn acknowledge(line: &mut Line) {
    let notice = line.raised()[0].clone();
    let what = Command::Notice {
        notice,
        deed: Deed::Acknowledge(None),
        comment: String::new(),
    };
    line.handle(Event::Command {
        ticket: Ticket(1),
        who: "Ana".into(),
        what,
    });
}

fn turns(line: &Line) -> Vec<Turn> {
    let kept = line.effects.iter().filter_map(|e| match e {
        Effect::Keep(Record::Turn(turn)) => Some(turn.clone()),
        _ => None,
    });
    kept.collect()
}

#[test]
fn an_escalation_comes_when_nobody_has_acknowledged_and_not_before() {
    let mut line = called(vec![route("desk", 0), route("phone", 600)]);
    assert_eq!(sent(&line, "mqtt"), [(0, State::Unacknowledged)]);
    assert_eq!(sent(&line, "desk"), [(0, State::Unacknowledged)]);
    line.run(590, low);
    assert_eq!(sent(&line, "phone"), []);
    line.run(20, low);
    let phone = sent(&line, "phone");
    let [(after, State::Unacknowledged)] = phone[..] else {
        panic!("{phone:?}");
    };
    assert!((600..=602).contains(&after), "{after}");
    let is_kept = |turn: &Turn| matches!(&turn.event, Event::Due(due) if !due.onward.is_empty());
    assert_eq!(turns(&line).iter().filter(|t| is_kept(t)).count(), 1);
    // Whoever was told is told the rest.
    acknowledge(&mut line);
    line.run(300, even);
    let states: Vec<State> = sent(&line, "phone").iter().map(|s| s.1).collect();
    let whole = [State::Unacknowledged, State::Acknowledged, State::Normal];
    assert_eq!(states, whole);
}

#[test]
fn what_is_acknowledged_in_time_is_never_escalated() {
    let mut line = called(vec![route("phone", 600)]);
    line.run(60, low);
    acknowledge(&mut line);
    line.run(900, low);
    line.run(300, even);
    assert_eq!(sent(&line, "phone"), []);
    assert_eq!(sent(&line, "mqtt").last().map(|s| s.1), Some(State::Normal));
    assert!(
        line.engine
            .next_deadline()
            .is_some_and(|at| at > line.now())
    );
}

#[test]
fn every_delivery_has_a_number_of_its_own() {
    let mut line = called(vec![
        route("desk", 0),
        route("phone", 60),
        route("bell", 60),
    ]);
    line.run(300, low);
    let mut numbers: Vec<u64> = line
        .effects
        .iter()
        .filter_map(|e| match e {
            Effect::Deliver(d) => Some(d.number),
            _ => None,
        })
        .collect();
    let count = numbers.len();
    numbers.sort_unstable();
    numbers.dedup();
    assert!(count >= 4 && numbers.len() == count, "{numbers:?}");
}

#[test]
fn a_shift_that_begins_is_told_of_what_still_stands() {
    let line = called(Vec::new());
    // The shift begins ten minutes after the call, on the minute.
    let raised = line.notices()[0].raised.to_jiff().expect("a time");
    let zoned = raised.to_zoned_datetime(jiff::tz::TimeZone::UTC);
    let minutes = (zoned.hour() as i16 * 60 + zoned.minute() as i16 + 10) % 1440;
    let from = jiff::civil::Time::new((minutes / 60) as i8, (minutes % 60) as i8, 0, 0);
    let from = from.expect("within a day");
    let shift = Shift {
        name: "next".into(),
        from,
        to: from,
    };
    let shift = Shift {
        to: jiff::civil::Time::new((from.hour() + 6) % 24, from.minute(), 0, 0).expect("a time"),
        ..shift
    };
    let mut next = route("next", 0);
    next.shifts = vec![shift];
    let mut line = called(vec![next]);
    assert_eq!(sent(&line, "next"), []);
    line.run(660, low);
    let told = sent(&line, "next");
    let [(after, State::Unacknowledged)] = told[..] else {
        panic!("{told:?}");
    };
    let wanted = 600 - i64::from(zoned.second());
    assert!(
        (wanted - 1..=wanted + 2).contains(&after),
        "{after} and not {wanted}"
    );
}

#[test]
fn a_priority_that_is_not_wanted_stays_away_until_it_is() {
    let mut high = route("high", 0);
    high.priorities = vec![Priority::High];
    let mut line = called(vec![high]);
    assert_eq!(sent(&line, "high"), []);
    line.run(120, low);
    assert_eq!(sent(&line, "high"), []);
}

#[test]
fn after_a_crash_everybody_is_told_what_they_would_have_been() {
    let routes = || vec![route("desk", 0), route("phone", 600)];
    for told_before in [300, 700] {
        let mut line = called(routes());
        line.run(told_before, low);
        // From a checkpoint in the middle, and from the whole journal.
        let now = line.now();
        let checkpoints = line.engine.checkpoints(now);
        let [Record::Checkpoint { state, turn, .. }] = &checkpoints[..] else {
            panic!("{checkpoints:?}");
        };
        let mut restored = Line::with_routes(bank(5), 1, routes());
        restored.engine.restore("filler-2", state).expect("fits");
        restored.engine.resume(*turn, &[]);
        let mut replayed = Line::with_routes(bank(5), 1, routes());
        for turn in turns(&line) {
            replayed.engine.replay(turn);
        }
        replayed.engine.resume(*turn, &[]);
        let before = line.effects.len();
        for other in [&mut restored, &mut replayed] {
            (other.cycle, other.common) = (line.cycle, line.common);
            other.noise = crate::line::Normal::new(99);
            other.run(400, low);
        }
        line.noise = crate::line::Normal::new(99);
        line.run(400, low);
        let of = |effects: &[Effect]| -> Vec<(Name, u64)> {
            let sent = effects.iter().filter_map(|e| match e {
                Effect::Deliver(d) => Some((d.way.name().into(), d.number)),
                _ => None,
            });
            sent.collect()
        };
        let wanted = of(&line.effects[before..]);
        let phone = wanted.iter().filter(|w| &*w.0 == "phone").count();
        assert_eq!(phone > 0, told_before == 300, "{wanted:?}");
        assert_eq!(of(&restored.effects), wanted, "from the checkpoint");
        assert_eq!(of(&replayed.effects), wanted, "from the journal");
    }
}
