//! Shifts as sources: which shift differs is said from the means of their days, whatever the day did to
//! all of them; and nothing is lost in the middle of a shift.
//!
//! Measured once on 40 machines with the budget of these tests (1 per 90 days, so at most 4 a year): 0.8
//! false notices a year with margin 0, 0.2 with 0.1; one shift lower by one sd of the means was the only name
//! within 60 days in 34 and 33 of 40.

#[path = "common/line.rs"]
mod line;

use std::collections::BTreeMap;
use std::sync::Arc;

use evenrow::engine::{Command, Effect, Engine, Event, Plant, Record, Ticket, Turn};
use evenrow::model::{
    Bank, BankIx, Calendar, LineChange, Measurement, Pairing, Shift, Sources, Time, US_PER_S, Value,
};
use evenrow::notice::{Kind, Notice};
use evenrow::stats::anova;
use jiff::tz::TimeZone;
use line::{Normal, bank as heads};

const MINUTE: i64 = 60 * US_PER_S;
const HOUR: i64 = 60 * MINUTE;

/// A day's common movement, a shift's own on top of it, and the noise of a value, all as sd in g.
const DAY: f64 = 2.0;
const OF_SHIFT: f64 = 0.3;
const NOISE: f64 = 1.0;
/// The sd of the shift means within a day.
const OF_MEANS: f64 = 0.327; // sqrt(OF_SHIFT² + NOISE²/60): a value in eight minutes

fn shift(name: &str, from: i8, to: i8) -> Shift {
    let wall = |hour| jiff::civil::Time::constant(hour, 0, 0, 0);
    Shift {
        name: name.into(),
        from: wall(from),
        to: wall(to),
    }
}

fn three() -> Vec<Shift> {
    vec![
        shift("early", 6, 14),
        shift("late", 14, 22),
        shift("night", 22, 6),
    ]
}

fn zone() -> TimeZone {
    TimeZone::get("Europe/Lisbon").expect("bundled")
}

/// As the settings make it when nothing else is said.
fn bank(shifts: &[Shift]) -> Bank {
    Bank {
        sources: Sources::Shifts(Calendar::new(shifts, zone())),
        pairing: Pairing::Day,
        spans: vec![10, 20, 40],
        look_every_us: 24 * HOUR,
        margin: 0.1,
        wait_cycles: 1,
        silent_after_us: Some(7 * 24 * HOUR),
        ..heads(2)
    }
}

/// A machine in shifts, one value in eight minutes.
struct Machine {
    engine: Engine,
    calendar: Calendar,
    noise: Normal,
    now: Time,
    day: (i64, f64),
    of_shift: ((usize, i64), f64),
    effects: Vec<Effect>,
    /// Every value by day and shift.
    values: BTreeMap<(i64, usize), Vec<f64>>,
}

impl Machine {
    /// It starts on 1 March 2026 at six; the clocks go forward on the 29th.
    fn new(bank: Bank, seed: u64) -> Self {
        let Sources::Shifts(calendar) = bank.sources.clone() else {
            panic!("a bank of shifts");
        };
        Self {
            engine: engine(bank),
            calendar,
            noise: Normal::new(seed),
            now: Time::parse_rfc3339("2026-03-01T06:00:00Z").expect("a time"),
            day: (i64::MIN, 0.0),
            of_shift: ((0, i64::MIN), 0.0),
            effects: Vec::new(),
            values: BTreeMap::new(),
        }
    }

    /// Days of 24 hours; `offset` is a shift's own.
    fn run(&mut self, days: f64, offset: impl Fn(usize) -> f64) {
        let until = self.now.plus_us((days * 24.0 * HOUR as f64) as i64);
        while self.now < until {
            self.deadline();
            if let Some(at) = self.calendar.at(self.now) {
                let value = self.value(at.shift, at.day) + offset(at.shift);
                self.values
                    .entry((at.day, at.shift))
                    .or_default()
                    .push(value);
                self.give(value, self.now);
            }
            self.now = self.now.plus_us(8 * MINUTE);
        }
    }

    fn value(&mut self, shift: usize, day: i64) -> f64 {
        if self.day.0 != day {
            self.day = (day, DAY * self.noise.next());
        }
        if self.of_shift.0 != (shift, day) {
            self.of_shift = ((shift, day), OF_SHIFT * self.noise.next());
        }
        503.0 + self.day.1 + self.of_shift.1 + NOISE * self.noise.next()
    }

    fn deadline(&mut self) {
        let now = self.now;
        self.effects
            .extend(self.engine.handle(Event::Deadline, now));
    }

    fn give(&mut self, value: f64, taken: Time) {
        let event = Event::Measurements(vec![measurement(value, taken)]);
        self.effects.extend(self.engine.handle(event, self.now));
    }

    fn outcome(&mut self, word: &str) -> u64 {
        let snapshot = self.engine.snapshot();
        snapshot.banks[0].outcomes.get(word).copied().unwrap_or(0)
    }

    /// Values of the day in the windows, by shift.
    fn entered(&mut self) -> Vec<usize> {
        let snapshot = self.engine.snapshot();
        snapshot.banks[0].sources.iter().map(|s| s.values).collect()
    }

    fn notices(&self) -> Vec<Arc<Notice>> {
        let kept = self.effects.iter().filter_map(|e| match e {
            Effect::Keep(Record::Notice(n)) => Some(n.clone()),
            _ => None,
        });
        kept.collect()
    }

    fn turns(&self) -> Vec<Turn> {
        let kept = self.effects.iter().filter_map(|e| match e {
            Effect::Keep(Record::Turn(turn)) => Some(turn.clone()),
            _ => None,
        });
        kept.collect()
    }

    fn state(&mut self) -> Vec<u8> {
        state(&mut self.engine, self.now)
    }
}

fn engine(bank: Bank) -> Engine {
    let plant = Plant {
        name: "Quayside".into(),
        zone: zone(),
        pages: "http://127.0.0.1:7310".into(),
        routes: Vec::new(),
        manners: evenrow::notice::Manners::default(),
    };
    Engine::new(plant, vec![Arc::new(bank)])
}

fn measurement(value: f64, taken: Time) -> Measurement {
    Measurement {
        bank: BankIx(0),
        source: "all shifts".into(),
        value: Value::parse(&format!("{value:.1}")).expect("a number"),
        taken: Some(taken),
        cycle: None,
    }
}

fn state(engine: &mut Engine, now: Time) -> Vec<u8> {
    match engine.checkpoints(now).pop() {
        Some(Record::Checkpoint { state, .. }) => state,
        other => panic!("no checkpoint: {other:?}"),
    }
}

fn names(notice: &Notice) -> Vec<&str> {
    notice.sources.iter().map(|s| &*s.source).collect()
}

#[test]
fn a_shift_that_is_lower_by_one_sd_of_the_means_is_named() {
    for (shifts, low, name) in [(three(), 2, "night"), (three(), 0, "early")] {
        let mut machine = Machine::new(bank(&shifts), 11);
        machine.run(60.0, |s| if s == low { -OF_MEANS } else { 0.0 });
        let notices = machine.notices();
        let first = notices.first().expect("a notice");
        assert_eq!(first.kind, Kind::LevelApart);
        assert_eq!(names(first), [name], "{}", first.text);
        assert!(first.sources[0].deviation < 0.0);
        assert_eq!(first.unit.as_ref(), "g");
    }
}

#[test]
fn two_shifts_that_differ_are_told() {
    let two = [shift("day", 6, 18), shift("night", 18, 6)];
    let mut machine = Machine::new(bank(&two), 12);
    machine.run(60.0, |s| if s == 1 { -2.0 * OF_MEANS } else { 0.0 });
    let notices = machine.notices();
    let first = notices.first().expect("a notice");
    assert_eq!(first.kind, Kind::LevelApart, "{}", first.text);
}

/// The values of the newest day taken one by one show a difference beyond all doubt, since they share what
/// their shift shared. The means of the days do not.
#[test]
fn shifts_without_a_difference_are_not_called_over_a_year() {
    let mut called = 0;
    for seed in 0..4 {
        let mut machine = Machine::new(bank(&three()), seed);
        machine.run(365.0, |_| 0.0);
        called += usize::from(!machine.notices().is_empty());
        let days: Vec<&[f64]> = machine.values.values().map(Vec::as_slice).collect();
        let raw = days
            .chunks_exact(3)
            .map(|day| anova(day).expect("enough values"));
        let fooled = raw.filter(|raw| raw.test.p < 1e-3).count();
        assert!(fooled > 36, "{fooled} of 365 days by raw values");
    }
    assert_eq!(called, 0, "years with a notice, of 4");
}

#[test]
fn a_restart_in_the_middle_of_a_shift_changes_nothing() {
    let low = |s| if s == 2 { -0.6 } else { 0.0 };
    let mut whole = Machine::new(bank(&three()), 21);
    whole.run(30.4, low);
    let mut going_on = Machine::new(bank(&three()), 21);
    // 14.9 days after six o'clock is in the middle of the night shift.
    going_on.run(14.9, low);
    let kept = going_on.state();
    let before = going_on.turns().len() as u64;
    let running = going_on.engine.snapshot().banks[0].shifts.clone();
    let running = running.expect("a bank of shifts").running;
    assert_eq!(running.len(), 1, "{running:?}");
    assert!(running[0].name.as_ref() == "night" && running[0].count > 10);
    let mut again = engine(bank(&three()));
    again.restore("filler-2", &kept).expect("it fits");
    again.resume(before, &[]);
    going_on.engine = again;
    going_on.run(30.4 - 14.9, low);
    assert_eq!(going_on.now, whole.now);
    assert_eq!(going_on.notices(), whole.notices());
    let wanted = whole.state();
    assert!(going_on.state() == wanted, "another state after a restart");
    // The journal alone gives the same.
    let mut replayed = engine(bank(&three()));
    for turn in whole.turns() {
        replayed.replay(turn);
    }
    let state = state(&mut replayed, whole.now);
    assert!(state == wanted, "another state from the journal");
}

#[test]
fn a_changed_calendar_gives_up_what_gathers_under_the_old_one() {
    let mut machine = Machine::new(bank(&three()), 22);
    machine.run(3.1, |_| 0.0);
    let kept = machine.state();
    let mut longer = three();
    longer[0] = shift("early", 5, 14);
    longer[2] = shift("night", 22, 5);
    let mut other = three();
    (other[0], other[1]) = (shift("early", 6, 13), shift("late", 13, 22));
    for (shifts, running) in [(three(), 1), (longer, 1), (other, 0)] {
        let mut again = engine(bank(&shifts));
        again.restore("filler-2", &kept).expect("it fits");
        let view = again.snapshot().banks[0].shifts.clone();
        let view = view.expect("a bank of shifts");
        assert_eq!(view.running.len(), running, "{shifts:?}");
    }
}

/// Puts `count` values a minute apart from this time on, each arriving as it is taken.
fn fill(machine: &mut Machine, from: &str, count: i64, value: f64) {
    let from = Time::parse_rfc3339(from).expect("a time");
    for i in 0..count {
        machine.now = from.plus_us(i * MINUTE);
        machine.deadline();
        machine.give(value, machine.now);
    }
}

fn wait_until(machine: &mut Machine, until: &str) {
    machine.now = Time::parse_rfc3339(until).expect("a time");
    machine.deadline();
}

#[test]
fn a_shift_enters_when_it_is_over_and_has_enough_values() {
    let mut machine = Machine::new(bank(&three()), 31);
    fill(&mut machine, "2026-03-02T06:00:00Z", 30, 500.0);
    wait_until(&mut machine, "2026-03-02T14:09:59Z");
    assert_eq!(machine.entered(), [0, 0, 0], "not settled yet");
    wait_until(&mut machine, "2026-03-02T14:10:00Z");
    assert_eq!(machine.entered(), [1, 0, 0]);
    fill(&mut machine, "2026-03-02T15:00:00Z", 29, 501.0);
    wait_until(&mut machine, "2026-03-02T22:10:00Z");
    assert_eq!(machine.entered(), [1, 0, 0], "29 are too few");
    let view = machine.engine.snapshot().banks[0].shifts.clone();
    let view = view.expect("a bank of shifts");
    assert_eq!((view.skipped, view.fewest, view.running.len()), (1, 30, 0));
    // What comes for a shift that is over is late, and changes nothing.
    machine.give(
        900.0,
        Time::parse_rfc3339("2026-03-02T07:00:00Z").expect("a time"),
    );
    assert_eq!(machine.outcome("late"), 1);
    assert_eq!(machine.outcome("accepted"), 59);
    // The night goes over midnight and belongs to the day on which it began.
    fill(&mut machine, "2026-03-02T23:45:00Z", 40, 502.0);
    wait_until(&mut machine, "2026-03-03T06:10:00Z");
    assert_eq!(machine.entered(), [1, 0, 1]);
    let taken = |machine: &mut Machine, s: usize| {
        let source = machine.engine.snapshot().banks[0].sources[s].clone();
        (source.last_value, source.last_taken.map(|t| t.to_string()))
    };
    let (value, at) = taken(&mut machine, 2);
    assert_eq!(
        (value, at.as_deref()),
        (Some(502.0), Some("2026-03-03T06:00:00Z"))
    );
    // Early and night of that day are one cycle, closed by the next day's first shift.
    fill(&mut machine, "2026-03-03T06:30:00Z", 30, 500.0);
    wait_until(&mut machine, "2026-03-03T14:10:00Z");
    let cycles = machine.engine.snapshot().banks[0].cycles.expect("paired");
    assert_eq!((cycles.closed, cycles.skipped, cycles.open), (1, 0, 1));
}

/// What a broker kept overnight comes at once, mixed, and none of it is late.
#[test]
fn a_backlog_of_several_shifts_is_taken_as_it_was_made() {
    let mut machine = Machine::new(bank(&three()), 32);
    machine.now = Time::parse_rfc3339("2026-03-04T05:00:00Z").expect("a time");
    let at = |text: &str, minute: i64| {
        Time::parse_rfc3339(text)
            .expect("a time")
            .plus_us(minute * MINUTE)
    };
    for minute in 0..40 {
        machine.deadline();
        machine.give(503.0, at("2026-03-03T15:00:00Z", minute));
        machine.give(500.0, at("2026-03-03T07:00:00Z", minute));
        machine.give(501.0, at("2026-03-03T23:00:00Z", minute));
        machine.now = machine.now.plus_us(US_PER_S);
    }
    assert_eq!(machine.outcome("accepted"), 120);
    machine.now = machine.now.plus_us(10 * MINUTE);
    machine.deadline();
    assert_eq!(machine.entered(), [1, 1, 0], "the night still runs");
}

#[test]
fn outside_all_shifts_values_are_refused_by_name() {
    let two = [shift("early", 6, 14), shift("late", 14, 22)];
    let mut machine = Machine::new(bank(&two), 33);
    fill(&mut machine, "2026-03-02T21:58:00Z", 4, 500.0);
    assert_eq!(machine.outcome("accepted"), 2);
    assert_eq!(machine.outcome("outside_shifts"), 2);
    let refusals = machine.engine.snapshot().banks[0].refusals.clone();
    assert!(
        refusals[0].last.detail.contains("outside all shifts"),
        "{refusals:?}"
    );
}

#[test]
fn after_a_changeover_a_running_shift_begins_again() {
    let mut machine = Machine::new(bank(&three()), 34);
    fill(&mut machine, "2026-03-02T06:00:00Z", 100, 500.0);
    let change = LineChange::Changeover {
        product: "330 ml".into(),
        target: None,
        declared: None,
    };
    let command = Event::Command {
        ticket: Ticket(1),
        who: "Ana".into(),
        what: Command::Line {
            bank: BankIx(0),
            change,
            reason: String::new(),
        },
    };
    let effects = machine.engine.handle(command, machine.now);
    assert!(!effects.is_empty());
    fill(&mut machine, "2026-03-02T09:00:00Z", 40, 330.0);
    wait_until(&mut machine, "2026-03-02T14:10:00Z");
    let source = machine.engine.snapshot().banks[0].sources[0].clone();
    assert_eq!(source.last_value, Some(330.0));
}
