//! Conditions as notices, and what people do with notices, through the engine's own door.

#[path = "common/line.rs"]
mod line;

use std::sync::Arc;

use evenrow::engine::{Command, Condition, Effect, Event, Outcome, Part, Ticket};
use evenrow::model::{BankIx, LineChange, US_PER_S};
use evenrow::notice::{CallOutcome, Deed, Kind, Latching, Notice, Shelving, State};
use evenrow::verdict::Keeping;
use line::{Line, bank, even, head};

fn names(notice: &Notice) -> Vec<&str> {
    notice.sources.iter().map(|s| &*s.source).collect()
}

/// Who a kind of condition names now; nothing when it has returned or never was.
fn holds(line: &Line, kind: Kind) -> Vec<String> {
    let last = line.conditions(kind).last().cloned();
    let last = last.filter(|n| n.holds());
    last.map_or_else(Vec::new, |n| {
        names(&n).into_iter().map(str::to_owned).collect()
    })
}

fn ids(line: &Line, kind: Kind) -> usize {
    let mut ids: Vec<_> = line.conditions(kind).iter().map(|n| n.id.clone()).collect();
    ids.sort();
    ids.dedup();
    ids.len()
}

fn ask(line: &mut Line, what: Command) -> Outcome {
    let before = line.effects.len();
    line.handle(Event::Command {
        ticket: Ticket(1),
        who: "R. Matos".into(),
        what,
    });
    let answer = line.effects[before..].iter().find_map(|e| match e {
        Effect::Answer { outcome, .. } => Some(outcome.clone()),
        _ => None,
    });
    answer.expect("an answer")
}

fn deed(line: &mut Line, notice: &Notice, deed: Deed) -> Arc<Notice> {
    let what = Command::Notice {
        notice: notice.id.clone(),
        deed,
        comment: String::new(),
    };
    match ask(line, what) {
        Outcome::Notice(notice) => notice,
        other => panic!("{other:?}"),
    }
}

fn enter(line: &mut Line, change: LineChange) {
    let what = Command::Line {
        bank: BankIx(0),
        change,
        reason: String::new(),
    };
    assert!(matches!(ask(line, what), Outcome::Line(_)));
}

#[test]
fn a_source_that_falls_silent_is_told_once_and_returns_when_it_delivers() {
    let mut line = Line::new(bank(12), 31);
    line.run(600, even);
    line.absent = vec![3];
    line.run(120, even);
    assert_eq!(ids(&line, Kind::SourceSilent), 0, "not before two minutes");
    line.run(80, even);
    assert_eq!(holds(&line, Kind::SourceSilent), ["03"]);
    line.absent = vec![3, 5];
    line.run(200, even);
    assert_eq!(holds(&line, Kind::SourceSilent), ["03", "05"]);
    line.absent = vec![5];
    line.run(60, even);
    assert_eq!(holds(&line, Kind::SourceSilent), ["05"]);
    line.absent.clear();
    line.run(60, even);
    assert_eq!(holds(&line, Kind::SourceSilent), [""; 0]);
    let last = line.conditions(Kind::SourceSilent).last().cloned();
    let last = last.expect("a notice");
    assert_eq!(last.state, State::ReturnedUnacknowledged);
    assert_eq!(last.subject, "filler-2: 05 delivers again");
    assert_eq!(
        ids(&line, Kind::SourceSilent),
        1,
        "one incident, one notice"
    );
    assert_eq!(line.raised().len(), 0, "no call besides");
}

#[test]
fn a_line_that_stands_is_not_silent() {
    let mut line = Line::new(bank(4), 32);
    line.run(600, even);
    enter(&mut line, LineChange::Stop);
    line.absent = vec![1, 2, 3, 4];
    line.run(1200, even);
    assert_eq!(ids(&line, Kind::SourceSilent), 0);
    enter(&mut line, LineChange::Start);
    line.run(100, even);
    assert_eq!(ids(&line, Kind::SourceSilent), 0);
    line.run(120, even);
    let last = line.conditions(Kind::SourceSilent).last().cloned();
    let last = last.expect("told");
    assert_eq!(last.subject, "filler-2: nothing arrives from all 4 sources");
}

#[test]
fn a_stuck_source_is_stuck_and_nothing_else() {
    let mut line = Line::new(bank(12), 33);
    line.common_step = 0.0;
    line.run(900, even);
    line.run(400, |s, _| (0.0, if s == 4 { 0.0 } else { 1.0 }));
    assert_eq!(holds(&line, Kind::SourceStuck), ["04"]);
    assert_eq!(line.raised().len(), 0, "no call of the same cause");
    let told = line.conditions(Kind::SourceStuck)[0].clone();
    assert_eq!(told.subject, "filler-2: 04 repeats one value");
    assert!(told.raised.us_since(told.since.at) < 90 * US_PER_S);
    line.run(60, even);
    assert_eq!(holds(&line, Kind::SourceStuck), [""; 0]);
}

#[test]
fn a_quiet_line_cries_no_wolf() {
    for (seed, resolution) in [(34, 1.0), (35, 4.0), (36, 20.0)] {
        let mut line = Line::new(bank(12), seed);
        line.resolution = resolution;
        line.common_step = 0.0;
        line.run(3000, even);
        assert_eq!(ids(&line, Kind::SourceStuck), 0, "step of {resolution} sd");
    }
}

#[test]
fn a_clock_that_is_ahead_or_refused_is_told() {
    let mut line = Line::new(bank(4), 37);
    line.run(300, even);
    line.ahead = Some((2, 90 * US_PER_S));
    line.run(60, even);
    assert_eq!(holds(&line, Kind::ClockWrong), ["02"]);
    line.ahead = Some((2, 3600 * US_PER_S));
    line.run(60, even);
    assert_eq!(holds(&line, Kind::ClockWrong), ["02"], "refused by now");
    line.ahead = None;
    line.run(60, even);
    assert_eq!(holds(&line, Kind::ClockWrong), [""; 0]);
    assert_eq!(ids(&line, Kind::ClockWrong), 1);
}

#[test]
fn a_lost_broker_is_the_one_cause_of_all_silence() {
    let mut line = Line::new(bank(4), 38);
    line.run(600, even);
    let broker = |condition| Event::Condition {
        part: Part::Broker,
        condition,
    };
    line.handle(broker(Condition::Trouble("no route to it".to_owned())));
    line.absent = vec![1, 2, 3, 4];
    line.run(600, even);
    let told = line.conditions(Kind::IntakeTrouble);
    let told = told.first().expect("told");
    assert_eq!(told.subject, "filler-2: measurements do not get in");
    assert!(told.text.contains("no route to it"));
    assert_eq!(ids(&line, Kind::SourceSilent), 0, "one cause, one notice");
    line.handle(broker(Condition::Well));
    line.absent.clear();
    line.run(300, even);
    let last = line.conditions(Kind::IntakeTrouble).last().cloned();
    assert!(last.is_some_and(|n| !n.holds()));
    assert_eq!(ids(&line, Kind::SourceSilent), 0);
}

#[test]
fn a_level_below_declared_needs_two_looks_that_share_no_value() {
    let mut line = Line::new(bank(4), 39);
    line.common_step = 0.0;
    line.level = 499.0;
    line.run(1250, even);
    assert_eq!(ids(&line, Kind::LevelBelowDeclared), 0);
    line.run(150, even);
    let told = line.conditions(Kind::LevelBelowDeclared);
    let told = told.first().expect("told").clone();
    assert!(
        told.subject
            .starts_with("filler-2: level is below declared by ")
    );
    line.level = 503.0;
    line.run(640, even);
    let last = |line: &Line| line.conditions(Kind::LevelBelowDeclared).last().cloned();
    assert!(last(&line).is_some_and(|n| n.holds()), "no evidence yet");
    line.run(700, even);
    assert!(last(&line).is_some_and(|n| !n.holds()));
}

/// A line with a call about head 7.
fn called(seed: u64) -> (Line, Arc<Notice>) {
    let mut line = Line::new(bank(12), seed);
    line.run(900, even);
    line.run(200, low);
    let notice = line.notices().last().cloned().expect("a call");
    assert_eq!(notice.state, State::Unacknowledged);
    (line, notice)
}

fn low(s: usize, _: i64) -> (f64, f64) {
    (if s == 7 { -3.0 } else { 0.0 }, 1.0)
}

#[test]
fn a_shelved_notice_keeps_evaluating_and_asks_again() {
    let (mut line, notice) = called(40);
    let hour = Deed::Shelve(3600 * US_PER_S, Shelving::Timed);
    assert_eq!(deed(&mut line, &notice, hour).state, State::Shelved);
    line.run(300, even);
    let last = line.notices().last().cloned().expect("kept");
    assert_eq!((last.state, last.holds()), (State::Shelved, false));
    // What comes back in that hour was meant too.
    line.run(300, low);
    let last = line.notices().last().cloned().expect("kept");
    assert_eq!((last.state, last.holds()), (State::Shelved, true));
    line.run(3000, low);
    let last = line.notices().last().cloned().expect("kept");
    assert_eq!(last.state, State::Unacknowledged);
    assert_eq!(
        last.handling.entries.last().map(|e| &*e.by),
        Some("evenrow")
    );
}

#[test]
fn a_stop_suppresses_and_the_start_lets_go_after_settling() {
    let mut line = Line::with(bank(12), 41, |manners| manners.settling_us = 60 * US_PER_S);
    line.run(900, even);
    line.run(200, low);
    enter(&mut line, LineChange::Stop);
    line.absent = (1..=12).collect();
    line.run(60, even);
    let state = |line: &Line| line.notices().last().map(|n| n.state);
    assert_eq!(state(&line), Some(State::Suppressed));
    enter(&mut line, LineChange::Start);
    line.absent.clear();
    line.run(50, low);
    assert_eq!(state(&line), Some(State::Suppressed), "it settles");
    line.run(40, low);
    assert_eq!(state(&line), Some(State::Unacknowledged));
}

#[test]
fn what_nobody_acknowledges_is_sent_again() {
    let mut line = Line::with(bank(12), 42, |manners| {
        manners.repeat_after_us = Some(600 * US_PER_S);
    });
    line.run(900, even);
    line.run(200, low);
    let sent = |line: &Line| {
        let sent = line.effects.iter();
        sent.filter(|e| matches!(e, Effect::Deliver(d) if d.notice.kind.is_call()))
            .count()
    };
    let before = sent(&line);
    line.run(1900, low);
    let again = sent(&line) - before;
    assert!((2..=6).contains(&again), "{again} sent in half an hour");
    let notice = line.notices().last().cloned().expect("a call");
    deed(&mut line, &notice, Deed::Acknowledge(None));
    let before = sent(&line);
    line.run(1900, low);
    assert!(sent(&line) - before <= 3, "only moved figures");
}

#[test]
fn latching_holds_a_return_until_it_is_seen() {
    let mut line = Line::with(bank(12), 43, |manners| manners.latching = Latching::On);
    line.run(900, even);
    line.run(200, low);
    let notice = line.notices().last().cloned().expect("a call");
    deed(&mut line, &notice, Deed::Acknowledge(None));
    line.run(300, even);
    let last = line.notices().last().cloned().expect("kept");
    assert_eq!(last.state, State::ReturnedUnacknowledged);
}

#[test]
fn an_outcome_can_be_said_after_the_end_and_counts_against_the_budget() {
    let (mut line, notice) = called(44);
    deed(&mut line, &notice, Deed::Acknowledge(None));
    line.run(300, even);
    let last = line.notices().last().cloned().expect("kept");
    assert_eq!(last.state, State::Normal);
    let told = Deed::Comment(Some(CallOutcome::NothingFound));
    let said = deed(&mut line, &notice, told);
    assert_eq!(said.handling.outcome, Some(CallOutcome::NothingFound));
    line.run(60, even);
    let kept = |line: &mut Line| line.engine.snapshot().banks[0].kept.expect("judged");
    let now = kept(&mut line);
    assert_eq!((now.calls, now.told, now.nothing_found), (1, 1, 1));
    // One false call within half an hour of a budget of 1 per 90 days.
    assert_eq!(now.keeping, Keeping::Broken);
    let told = Deed::Comment(Some(CallOutcome::FoundAndCorrected));
    deed(&mut line, &notice, told);
    line.run(60, even);
    let now = kept(&mut line);
    assert_eq!((now.told, now.nothing_found), (1, 0));
    assert_eq!(now.keeping, Keeping::Agrees);
}

#[test]
fn a_restart_keeps_what_stands_and_ends_it_on_evidence_only() {
    let mut line = Line::new(bank(12), 45);
    line.run(600, even);
    line.absent = vec![3];
    line.run(300, even);
    assert_eq!(holds(&line, Kind::SourceSilent), ["03"]);
    let records = line.engine.checkpoints(line.now());
    let Some(evenrow::engine::Record::Checkpoint { state, .. }) = records.first() else {
        panic!("no checkpoint");
    };
    let mut again = Line::new(bank(12), 46);
    again.engine.restore("filler-2", state).expect("fits");
    again.engine.resume(5000, &[]);
    again.cycle = line.cycle;
    again.absent = vec![3];
    again.run(200, even);
    let open = again.engine.snapshot().banks[0].open.clone();
    assert_eq!(open.len(), 1, "it stands");
    assert!(open[0].holds());
    again.absent.clear();
    again.run(60, even);
    assert_eq!(holds(&again, Kind::SourceSilent), [""; 0]);
    assert_eq!(ids(&again, Kind::SourceSilent), 1);
    assert_eq!(again.engine.snapshot().banks[0].sources[0].name, head(1));
}
