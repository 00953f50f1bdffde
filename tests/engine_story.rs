//! The engine on simulated lines: what is called, who is named, and how it ends.

#[path = "common/line.rs"]
mod line;
#[path = "engine_story/routes.rs"]
mod routes;

use evenrow::notice::{Kind, State};
use line::{Line, bank, even};

#[test]
fn a_drifting_head_is_named_and_clears_when_put_right() {
    let mut line = Line::new(bank(12), 1);
    line.run(1800, even);
    assert_eq!(line.raised().len(), 0);
    line.run(240, |s, c| {
        (
            if s == 7 {
                -3.0 * (c as f64 / 20.0).min(1.0)
            } else {
                0.0
            },
            1.0,
        )
    });
    let notices = line.notices();
    let first = notices.first().expect("a notice within four minutes");
    assert_eq!(first.kind, Kind::LevelApart);
    assert_eq!(first.state, State::Unacknowledged);
    let named: Vec<&str> = first.sources.iter().map(|s| &*s.source).collect();
    assert_eq!(named, ["07"]);
    line.run(240, even);
    let last = line.notices().last().cloned().expect("still there");
    assert_eq!(last.state, State::ReturnedUnacknowledged);
    line.run(1800, even);
    assert_eq!(line.raised().len(), 1, "nothing is raised again");
}

#[test]
fn an_erratic_head_is_named_and_clears_when_put_right() {
    let mut line = Line::new(bank(12), 2);
    line.run(1800, even);
    line.run(400, |s, _| (0.0, if s == 3 { 3.0 } else { 1.0 }));
    let notices = line.notices();
    let first = notices.first().expect("a notice");
    assert_eq!(first.kind, Kind::SpreadApart);
    let named: Vec<&str> = first.sources.iter().map(|s| &*s.source).collect();
    assert_eq!(named, ["03"]);
    line.run(600, even);
    let last = line.notices().last().cloned().expect("still there");
    assert_eq!(last.state, State::ReturnedUnacknowledged);
    line.run(1800, even);
    assert_eq!(line.raised().len(), 1, "nothing is raised again");
}

/// The newest state of the only notice.
fn only(line: &Line) -> std::sync::Arc<evenrow::notice::Notice> {
    assert_eq!(line.raised().len(), 1, "{:?}", line.raised());
    line.notices().last().cloned().expect("a notice")
}

fn names(notice: &evenrow::notice::Notice) -> Vec<&str> {
    notice.sources.iter().map(|s| &*s.source).collect()
}

#[test]
fn of_two_sources_nobody_is_the_culprit() {
    let mut line = Line::new(bank(2), 3);
    line.run(900, even);
    line.run(200, |s, _| (if s == 2 { 3.0 } else { 0.0 }, 1.0));
    let notice = only(&line);
    assert_eq!(notice.kind, Kind::LevelApart);
    assert_eq!(notice.sources.len(), 2);
    assert!(notice.subject.contains("differ by"), "{}", notice.subject);
    assert!(
        notice.advice.contains("do not tell which"),
        "{}",
        notice.advice
    );
    line.run(300, even);
    assert_eq!(only(&line).state, State::ReturnedUnacknowledged);
}

#[test]
fn two_of_four_are_a_bank_split_in_two() {
    let mut line = Line::new(bank(4), 4);
    line.run(900, even);
    line.run(200, |s, _| (if s <= 2 { -3.0 } else { 0.0 }, 1.0));
    let notice = only(&line);
    assert_eq!(notice.kind, Kind::BankSplit);
    assert_eq!(notice.sources.len(), 2);
    assert!(
        notice.text.contains("against the 2 even ones"),
        "{}",
        notice.text
    );
}

#[test]
fn one_that_was_back_and_leaves_again_is_named_again() {
    let mut line = Line::new(bank(12), 5);
    line.run(900, even);
    let both = |s: usize, _: i64| (if s == 5 || s == 9 { -3.0 } else { 0.0 }, 1.0);
    line.run(200, both);
    assert_eq!(names(&only(&line)).len(), 2);
    line.run(300, |s, _| (if s == 9 { -3.0 } else { 0.0 }, 1.0));
    assert_eq!(names(&only(&line)), ["09"]);
    line.run(300, both);
    assert_eq!(names(&only(&line)).len(), 2);
    assert!(only(&line).state.is_active());
}

#[test]
fn a_drift_is_found_while_most_others_are_silent() {
    let mut line = Line::new(bank(12), 6);
    line.run(900, even);
    // Seven heads are out of use; the other five go on, one of them low.
    line.absent = (6..=12).collect();
    line.run(400, even);
    assert_eq!(line.raised().len(), 0);
    line.run(200, |s, _| (if s == 2 { -3.0 } else { 0.0 }, 1.0));
    assert_eq!(names(&only(&line)), ["02"]);
}

#[test]
fn a_source_that_stops_scattering_is_named() {
    let mut line = Line::new(bank(12), 7);
    line.common_step = 0.0;
    line.run(900, even);
    // It scatters by a quarter of the others, so values still change.
    line.resolution = 0.01;
    line.run(400, |s, _| (0.0, if s == 4 { 0.25 } else { 1.0 }));
    let notice = only(&line);
    assert_eq!(notice.kind, Kind::SpreadApart);
    assert_eq!(names(&notice), ["04"]);
    assert!(
        notice.subject.contains("suspiciously steady"),
        "{}",
        notice.subject
    );
}

#[test]
fn an_absurd_cycle_number_is_refused_and_harms_nobody() {
    let mut line = Line::new(bank(12), 8);
    line.run(100, even);
    for cycle in [i64::MAX, i64::MIN] {
        line.wrong_cycle(cycle);
    }
    let before = line.accepted();
    line.run(100, even);
    assert_eq!(line.accepted(), before + 1200);
}

#[test]
fn a_source_that_stays_off_by_a_fifth_more_than_the_margin_is_not_cleared() {
    // The promise is at most 5 % within 5 000 cycles; of eight lines at most two may clear (more than that
    // has a probability of 0.006 at 5 % each).
    let mut cleared = 0;
    for seed in 0..8 {
        let mut wide = bank(12);
        wide.margin = 2.0;
        wide.look_every_us = 15_000_000;
        let mut line = Line::new(wide, 100 + seed);
        line.run(200, even);
        line.run(100, |s, _| (if s == 3 { 6.0 } else { 0.0 }, 1.0));
        assert_eq!(names(&only(&line)), ["03"]);
        line.run(5000, |s, _| (if s == 3 { 2.4 } else { 0.0 }, 1.0));
        cleared += usize::from(line.notices().iter().any(|n| !n.state.is_active()));
    }
    assert!(cleared <= 2, "{cleared} of 8 cleared wrongly");
}

#[test]
fn what_was_kept_goes_on_and_what_no_longer_fits_ends() {
    use evenrow::engine::{Effect, Record, RestoreError};
    use evenrow::model::{Pairing, Sources};
    let mut line = Line::new(bank(12), 9);
    line.run(900, even);
    line.run(200, |s, _| (if s == 7 { -3.0 } else { 0.0 }, 1.0));
    let records = line.engine.checkpoints(line.now());
    let Some(Record::Checkpoint { state, .. }) = records.first() else {
        panic!("no checkpoint");
    };
    // The same setup: the notice is open as before.
    let mut same = Line::new(bank(12), 9);
    same.engine.restore("filler-2", state).expect("fits");
    let snapshot = same.engine.snapshot();
    assert_eq!(snapshot.banks[0].open.len(), 1);
    assert_eq!(snapshot.banks[0].sources[0].values, 640);
    // The named source is no longer listed, or the pairing is another: the notice ends at the next look.
    let mut fewer = bank(12);
    fewer.sources = Sources::Listed((1..=12).filter(|n| *n != 7).map(line::head).collect());
    let mut unpaired = bank(12);
    unpaired.pairing = Pairing::None;
    for (changed, fits) in [(fewer, true), (unpaired, false)] {
        let mut other = Line::new(changed, 10);
        let restored = other.engine.restore("filler-2", state);
        assert_eq!(restored.is_ok(), fits);
        if !fits {
            assert!(matches!(restored, Err(RestoreError::PairingChanged(_))));
        }
        other.engine.resume(5000, &[]);
        other.cycle = line.cycle;
        other.k = 6;
        other.run(100, even);
        let sent = other
            .effects
            .iter()
            .filter(|e| matches!(e, Effect::Deliver(_)))
            .count();
        assert!(sent > 0, "the end is told");
        assert_eq!(
            other.notices().last().map(|n| n.state),
            Some(State::ReturnedUnacknowledged)
        );
    }
}
