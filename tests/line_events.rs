//! Line events in the engine: what counts after them, what is judged, and what a restart keeps.

#[path = "common/line.rs"]
mod line;

use evenrow::engine::{Command, Effect, Event, Outcome, Record, SourceState, Ticket};
use evenrow::model::{BankIx, LineChange, Reason, Value};
use evenrow::notice::{Kind, State};
use evenrow::verdict::watch::Progress;
use line::{Line, bank, even, head};

/// Enters a line event and gives the answer.
fn enter(line: &mut Line, change: LineChange) -> Outcome {
    let before = line.effects.len();
    line.handle(Event::Command {
        ticket: Ticket(1),
        who: "R. Matos".into(),
        what: Command::Line {
            bank: BankIx(0),
            change,
            reason: "as planned".to_owned(),
        },
    });
    let answer = line.effects[before..].iter().find_map(|e| match e {
        Effect::Answer { outcome, .. } => Some(outcome.clone()),
        _ => None,
    });
    answer.expect("an answer")
}

fn taken(outcome: &Outcome) -> bool {
    matches!(outcome, Outcome::Line(_))
}

fn adjustment(source: usize, by: Option<f64>) -> LineChange {
    LineChange::Adjustment {
        source: head(source),
        by,
    }
}

fn changeover(product: &str, target: &str) -> LineChange {
    LineChange::Changeover {
        product: product.into(),
        target: Value::parse(target).ok(),
        declared: None,
    }
}

/// A head that is 3 g low from here on.
fn low(of: usize) -> impl Fn(usize, i64) -> (f64, f64) {
    move |s, _| (if s == of { -3.0 } else { 0.0 }, 1.0)
}

fn progress(line: &mut Line) -> Progress {
    let snapshot = line.engine.snapshot();
    snapshot.banks[0].watch.as_ref().expect("a watch").progress
}

#[test]
fn an_adjustment_that_worked_clears_on_values_after_it_alone() {
    let mut line = Line::new(bank(12), 21);
    line.run(1800, even);
    line.run(120, low(7));
    let notice = line.notices().last().cloned().expect("a notice");
    assert_eq!(notice.sources[0].source, head(7));
    assert!(taken(&enter(&mut line, adjustment(7, Some(3.0)))));
    line.run(200, even);
    let last = line.notices().last().cloned().expect("still there");
    assert_eq!(last.state, State::ReturnedUnacknowledged);
    assert_eq!(line.raised().len(), 1);
    // The window of the adjusted source holds its old values, and they no longer count.
    let snapshot = line.engine.snapshot();
    assert_eq!(snapshot.banks[0].line_events.len(), 1);
}

#[test]
fn an_adjustment_that_overshot_is_followed_to_the_other_side() {
    let mut line = Line::new(bank(12), 22);
    line.run(1800, even);
    line.run(120, low(7));
    assert!(taken(&enter(&mut line, adjustment(7, None))));
    line.run(300, |s, _| (if s == 7 { 2.5 } else { 0.0 }, 1.0));
    assert_eq!(line.raised().len(), 1, "one incident");
    let last = line.notices().last().cloned().expect("still there");
    assert_eq!(last.state, State::Unacknowledged);
    assert!(
        last.sources[0].low > 1.0,
        "above the others now: {:?}",
        last.sources[0]
    );
}

#[test]
fn a_changeover_begins_afresh_and_what_was_learnt_comes_back() {
    let mut line = Line::new(bank(12), 23);
    assert!(taken(&enter(&mut line, changeover("A", "503"))));
    line.run(1200, even);
    assert_eq!(progress(&mut line), Progress::Watching);
    assert!(taken(&enter(&mut line, changeover("B", "750"))));
    assert!(matches!(progress(&mut line), Progress::Learning { .. }));
    let snapshot = line.engine.snapshot();
    let target = snapshot.banks[0].bank.characteristic.target;
    assert_eq!(target, Value::parse("750").ok());
    // The other product fills a different amount; nobody is called for that.
    line.run(900, |s, _| (247.0 + 0.1 * s as f64 / 12.0, 1.5));
    assert_eq!(line.raised().len(), 0);
    assert!(taken(&enter(&mut line, changeover("A", "503"))));
    // What was learnt for A is believed after a hundred cycles in which its noise is what it was.
    line.run(150, even);
    assert_eq!(progress(&mut line), Progress::Watching, "A is known");
    line.run(450, even);
    assert_eq!(line.raised().len(), 0);
}

#[test]
fn a_stopped_line_is_not_judged_and_nobody_falls_silent() {
    let mut line = Line::new(bank(4), 24);
    line.run(600, even);
    assert!(taken(&enter(&mut line, LineChange::Stop)));
    assert!(!taken(&enter(&mut line, LineChange::Stop)));
    let before = line.accepted();
    // A test run of one head while the line stands; the others give nothing.
    line.absent = vec![2, 3, 4];
    line.run(600, low(1));
    assert_eq!(line.accepted(), before);
    let snapshot = line.engine.snapshot();
    let refused = &snapshot.banks[0].refusals;
    assert_eq!(refused[0].reason, Reason::LineStopped);
    let states = snapshot.banks[0].sources.iter().map(|s| s.state);
    assert!(states.into_iter().all(|s| s == SourceState::Present));
    assert!(taken(&enter(&mut line, LineChange::Start)));
    line.absent.clear();
    line.run(600, even);
    assert!(line.accepted() > before);
    assert_eq!(line.raised().len(), 0);
}

#[test]
fn a_source_out_of_use_leaves_the_comparison_and_comes_back_with_fresh_values() {
    let mut line = Line::new(bank(12), 25);
    line.run(1800, even);
    line.run(120, low(7));
    assert_eq!(line.raised().len(), 1);
    let out = LineChange::OutOfUse { source: head(7) };
    assert!(taken(&enter(&mut line, out.clone())));
    assert!(!taken(&enter(&mut line, out)));
    line.absent = vec![7];
    line.run(400, even);
    let last = line.notices().last().cloned().expect("still there");
    assert!(!last.state.is_active(), "nobody is left to come back");
    let snapshot = line.engine.snapshot();
    assert_eq!(snapshot.banks[0].sources[6].state, SourceState::OutOfUse);
    line.absent.clear();
    let back = LineChange::BackInUse { source: head(7) };
    assert!(taken(&enter(&mut line, back)));
    line.run(900, even);
    assert_eq!(line.raised().len(), 1);
    line.run(200, low(7));
    assert_eq!(line.raised().len(), 2, "it is compared again");
    assert_eq!(line.notices().last().expect("new").kind, Kind::LevelApart);
}

#[test]
fn what_makes_no_sense_is_refused_and_kept_nowhere() {
    let mut line = Line::new(bank(4), 26);
    line.run(50, even);
    for (change, found) in [
        (adjustment(99, None), false),
        (LineChange::OutOfUse { source: "x".into() }, false),
        (LineChange::BackInUse { source: head(1) }, true),
        (LineChange::Start, true),
    ] {
        let outcome = enter(&mut line, change.clone());
        let right = match outcome {
            Outcome::NotFound(_) => !found,
            Outcome::Refused(_) => found,
            _ => false,
        };
        assert!(right, "{change:?}: {outcome:?}");
    }
    let kept = |e: &Effect| matches!(e, Effect::Keep(Record::Line { .. }));
    assert!(!line.effects.iter().any(kept));
}

#[test]
fn a_replay_of_the_turns_comes_to_the_same_state() {
    let mut line = Line::new(bank(6), 27);
    line.run(700, even);
    enter(&mut line, changeover("A", "503"));
    line.run(60, low(3));
    enter(&mut line, adjustment(3, Some(3.0)));
    let out = LineChange::OutOfUse { source: head(2) };
    enter(&mut line, out);
    line.run(100, even);
    enter(&mut line, LineChange::Stop);
    let mut again = Line::new(bank(6), 27);
    for effect in &line.effects {
        if let Effect::Keep(Record::Turn(turn)) = effect {
            again.engine.replay(turn.clone());
        }
    }
    let now = line.now();
    assert_eq!(line.engine.checkpoints(now), again.engine.checkpoints(now));
}
