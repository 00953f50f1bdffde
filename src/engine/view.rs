//! The snapshot's pictures of the banks.

use std::sync::Arc;

use crate::model::{Measurement, Reason, Refusal, SourceIx, Sources, Time};
use crate::notice::Notice;
use crate::verdict::{Aspect, BudgetKept, Came, Look, SourceLook, budget_kept};

use super::bank::Watched;
use super::conditions::Standing;
use super::incident::Incident;
use super::shifts::{FEWEST_VALUES, Gathering};
use super::{
    BankView, Condition, Cycles, Plant, RefusalView, RunningShift, ShiftsView, Snapshot,
    SourceView, WatchView,
};

/// A snapshot of nothing.
pub fn empty(plant: Arc<Plant>) -> Snapshot {
    Snapshot {
        version: 0,
        plant,
        broker: Condition::Starting,
        store: Condition::Starting,
        banks: Vec::new(),
        refusals: Vec::new(),
        outlets: Vec::new(),
    }
}

/// A bank, now.
pub fn bank_view(watched: &Watched) -> BankView {
    let state = &watched.state;
    let mut open: Vec<Arc<Notice>> = state.papers().cloned().collect();
    open.sort_by_key(|n| std::cmp::Reverse(n.raised));
    let shown = shown_look(&state.looks, watched.bank.margin);
    let cycles = state.windows.blocks().map(|b| {
        let (closed, skipped, open) = b.counts();
        Cycles {
            closed,
            skipped,
            open,
        }
    });
    BankView {
        bank: watched.bank.clone(),
        sources: watched
            .display_order()
            .into_iter()
            .map(|s| source_view(watched, s, shown))
            .collect(),
        looks: state.looks.clone(),
        shown_span: shown.map(|l| l.span),
        open,
        raised: watched.raised.clone(),
        outcomes: watched.outcomes.clone(),
        refusals: watched.refusals.clone(),
        cycles,
        stopped: state.line.stopped.clone(),
        product: state.line.product.clone(),
        line_events: state.line.newest.iter().cloned().collect(),
        watch: state.watch.as_ref().map(|w| WatchView {
            progress: w.progress(),
            readings: w.readings(),
            figures: w.figures(),
        }),
        interval_us: watched.interval_us(),
        next_look: state.look_due,
        newest_taken: state.sources.iter().filter_map(|s| s.last_taken).max(),
        mean: shown.and_then(|l| mean(&l.sources)),
        kept: kept(watched),
        raised_at: state.raised_at.iter().copied().collect(),
        shifts: shifts(watched),
    }
}

/// Until the newest moment that the bank knows of.
fn kept(watched: &Watched) -> Option<BudgetKept> {
    let state = &watched.state;
    let tally = state.tally;
    let came = Came {
        calls: tally.calls,
        told: tally.told,
        nothing_found: tally.nothing_found,
    };
    let now = state.last_look.max(state.began)?;
    budget_kept(watched.bank.budget, came, state.began?, now)
}

fn shifts(watched: &Watched) -> Option<ShiftsView> {
    let Sources::Shifts(_) = watched.bank.sources else {
        return None;
    };
    let shift = |g: &Gathering| RunningShift {
        name: watched.name(g.source),
        end: g.end,
        count: g.count,
        mean: g.mean(),
    };
    let shifts = &watched.state.shifts;
    Some(ShiftsView {
        running: shifts.running().map(shift).collect(),
        skipped: shifts.skipped,
        fewest: FEWEST_VALUES,
    })
}

/// The look whose figures stand for "now": over the shortest span that still resolves half the
/// margin, else over the longest that could be judged. A longer window only mixes in the past.
pub fn shown_look(looks: &[Arc<Look>], margin: f64) -> Option<&Look> {
    let judged = || looks.iter().filter(|l| !l.sources.is_empty());
    let resolves = |l: &&Arc<Look>| {
        let widths = l
            .sources
            .iter()
            .filter_map(|s| s.deviation.map(|d| d.high - d.low));
        margin > 0.0 && widths.fold(0.0, f64::max) <= margin
    };
    let chosen = judged().find(resolves).or_else(|| judged().next_back());
    chosen.map(|l| &**l)
}

fn mean(sources: &[SourceLook]) -> Option<f64> {
    let n = sources.len() as f64;
    (n > 0.0).then(|| sources.iter().map(|s| s.mean).sum::<f64>() / n)
}

fn source_view(watched: &Watched, source: SourceIx, shown: Option<&Look>) -> SourceView {
    let known = &watched.state.sources[source.index()];
    let seen = shown.and_then(|l| l.sources.iter().find(|s| s.source == source));
    // What an open notice says of a source rests on the values since it left: the page says the same.
    let followed = |aspect| {
        let incidents = watched
            .state
            .incidents
            .iter()
            .filter(|i| i.aspect == aspect);
        incidents.filter_map(|i| i.size_of(source)).next()
    };
    let deviation = followed(Aspect::Level).or(seen.and_then(|s| s.deviation));
    let sigma = shown.map_or(0.0, |l| l.sigma);
    let about = |i: &&Incident| i.is_about(source);
    let incidents = watched.state.incidents.iter().filter(about);
    let incidents = incidents.map(|i| i.notice.kind);
    let names =
        |c: &&Standing| c.notice.holds() && c.notice.sources.iter().any(|s| s.source == known.name);
    let conditions = watched.state.conditions.iter().filter(names);
    let conditions = conditions.map(|c| c.notice.kind);
    SourceView {
        source,
        name: known.name.clone(),
        state: known.state(),
        values: watched.state.windows.ring(source).len(),
        last_value: known.last_value,
        last_taken: known.last_taken,
        last_received: known.last_received,
        deviation,
        deviation_sigmas: deviation.filter(|_| sigma > 0.0).map(|d| d.value / sigma),
        sd_ratio: followed(Aspect::Spread).or(seen.and_then(|s| s.sd_ratio)),
        named: incidents.chain(conditions).collect(),
        lag_us: watched.senses.lag_us(&known.name),
    }
}

/// A refusal by the bank itself, in words.
pub fn refusal_of(m: &Measurement, reason: Reason, watched: &Watched, now: Time) -> Refusal {
    let taken = m.taken.unwrap_or(now);
    let detail = match reason {
        Reason::TooFarAhead => format!(
            "taken at {taken}, more than 5 minutes ahead of {now}; check the clock of the sender"
        ),
        Reason::TooOld => format!("taken at {taken}, older than oldest_days allows at {now}"),
        Reason::UnknownSource => format!("source \"{}\" is not one of those listed", m.source),
        Reason::TooManySources => format!(
            "source \"{}\" would be one more than most_sources allows",
            m.source
        ),
        Reason::NoCycle => "the bank pairs by cycle and the payload carries none".to_owned(),
        Reason::Double => format!("source \"{}\" has already delivered this value", m.source),
        Reason::OutsideShifts => {
            format!(
                "taken at {taken}, outside all shifts; each [[plant.shift]] is one or a part of one"
            )
        }
        Reason::LineStopped => format!("taken at {taken}, while the line stands; enter its start"),
        other => other.word().to_owned(),
    };
    Refusal {
        bank: Some(m.bank),
        reason,
        topic: watched.bank.name.clone(),
        detail,
        excerpt: format!("{} = {}", m.source, m.value),
    }
}

/// Counts a refusal under its reason and keeps it as the last of its kind.
pub fn count_refusal(list: &mut Vec<RefusalView>, refusal: Refusal, at: Time) {
    match list.iter_mut().find(|v| v.reason == refusal.reason) {
        Some(view) => {
            view.count += 1;
            view.last = refusal;
            view.at = at;
        }
        None => list.push(RefusalView {
            reason: refusal.reason,
            count: 1,
            last: refusal,
            at,
        }),
    }
}
