//! What notices say and how they end: names, since when, clearing.

use super::crew::Runs;
use super::feed::{Feed, Setup};
use super::line::START;
use super::measure::{Change, until_call};
use super::rig::{Rig, Start, Stepper};
use super::table::Figure;
use evenrow::model::US_PER_S;
use evenrow::notice::Kind;

/// Who is not called within this many cycles is not called.
const MOST: i64 = 20_000;

/// Learnt states that runs begin from.
const STATES: usize = 8;

/// Cycles between the change and what is asked afterwards, and between a call and a return.
const QUIET: i64 = 60;

/// A run up to the call after a change.
struct Called {
    rig: Rig,
    feed: Feed,
    /// The first cycle after the change.
    changed: i64,
}

/// Runs with a change, each up to its call; `None` where a false call came first or none at all.
fn called<T: Send>(
    setup: &Setup,
    change: &Change,
    runs: &Runs,
    then: impl Fn(Called) -> T + Sync,
) -> Vec<Option<T>> {
    let starts = Start::Learnt(STATES).prepare(setup);
    runs.each(|run, seed| {
        let (mut rig, mut feed) = starts.begin(run, seed);
        let quiet = feed.below(QUIET);
        if until_call(&mut rig, &mut feed, quiet).1 {
            return None;
        }
        change.apply(&mut feed);
        let changed = rig.cycle + 1;
        let call = until_call(&mut rig, &mut feed, MOST).1;
        call.then(|| then(Called { rig, feed, changed }))
    })
}

fn steps(rig: &mut Rig, feed: &mut Feed, cycles: i64) {
    let mut values = Vec::new();
    for _ in 0..cycles {
        feed.cycle(&mut values);
        rig.step(&values);
    }
}

/// Share of runs whose names are exactly right, and share with any wrong name; a run without a call is
/// not right.
pub fn names(setup: &Setup, change: &Change, after: i64, runs: &Runs) -> Vec<Figure> {
    let moved = change.sources();
    let all = called(setup, change, runs, |mut c| {
        steps(&mut c.rig, &mut c.feed, after);
        let named = c.rig.named();
        (named == moved, named.iter().any(|s| !moved.contains(s)))
    });
    let exact: Vec<bool> = all.iter().map(|r| r.is_some_and(|r| r.0)).collect();
    let wrong: Vec<bool> = all.iter().map(|r| r.is_some_and(|r| r.1)).collect();
    vec![Figure::share(&exact), Figure::share(&wrong)]
}

/// Share of calls that are about spread, and share that name exactly those that changed.
pub fn spread(setup: &Setup, change: &Change, runs: &Runs) -> Vec<Figure> {
    let moved = change.sources();
    let all = called(setup, change, runs, |c| {
        let about_spread = c.rig.notices[0].kind == Kind::SpreadApart;
        (about_spread, c.rig.named() == moved)
    });
    let about_spread: Vec<bool> = all.iter().flatten().map(|r| r.0).collect();
    let exact: Vec<bool> = all.iter().flatten().map(|r| r.1).collect();
    vec![Figure::share(&about_spread), Figure::share(&exact)]
}

/// Share of calls whose set of starts holds the true one, and the set's mean width in cycles.
pub fn since(setup: &Setup, change: &Change, runs: &Runs) -> Vec<Figure> {
    let all = called(setup, change, runs, |c| {
        let since = c.rig.notices[c.rig.notices.len() - 1].since;
        let truth = START.plus_us(c.changed * US_PER_S);
        let width = since.latest.us_since(since.earliest) / US_PER_S + 1;
        (
            since.earliest <= truth && truth <= since.latest,
            width as f64,
        )
    });
    let covered: Vec<bool> = all.iter().flatten().map(|r| r.0).collect();
    let widths: Vec<f64> = all.iter().flatten().map(|r| r.1).collect();
    vec![Figure::share(&covered), Figure::mean(&widths)]
}

/// Steps until no notice holds; `None` when some still does after `most` cycles.
fn until_over(rig: &mut Rig, feed: &mut Feed, most: i64) -> Option<i64> {
    let mut values = Vec::new();
    (1..=most).find(|_| {
        feed.cycle(&mut values);
        rig.step(&values);
        !rig.is_open()
    })
}

/// Mean cycles from the return of all sources to the end of the notice.
pub fn clearing(setup: &Setup, change: &Change, runs: &Runs) -> Figure {
    let all = called(setup, change, runs, |mut c| {
        steps(&mut c.rig, &mut c.feed, QUIET);
        c.feed.offsets.fill(0.0);
        c.feed.sds.fill(1.0);
        until_over(&mut c.rig, &mut c.feed, MOST).unwrap_or(MOST) as f64
    });
    let all: Vec<f64> = all.into_iter().flatten().collect();
    Figure::mean(&all)
}

/// Share of notices that end within 5 000 cycles although the sources only go to `stay`.
pub fn wrong_clearing(setup: &Setup, change: &Change, stay: &Change, runs: &Runs) -> Figure {
    let all = called(setup, change, runs, |mut c| {
        stay.apply(&mut c.feed);
        until_over(&mut c.rig, &mut c.feed, 5000).is_some()
    });
    let all: Vec<bool> = all.into_iter().flatten().collect();
    Figure::share(&all)
}

/// Mean number of notices raised within 20 000 cycles at a constant offset.
pub fn repeats(setup: &Setup, change: &Change, runs: &Runs) -> Figure {
    let starts = Start::Learnt(STATES).prepare(setup);
    let all = runs.each(|run, seed| {
        let (mut rig, mut feed) = starts.begin(run, seed);
        change.apply(&mut feed);
        steps(&mut rig, &mut feed, 20_000);
        rig.notices.len() as f64
    });
    Figure::mean(&all)
}
