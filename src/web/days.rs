//! The last day of every bank in half hours, for the plant's page.
//!
//! Owns what was read from the store: a half hour that is over is read once. What must hold: a plant of
//! a thousand banks costs a thousand small reads in half an hour, not in each rendering; only one
//! request reads at a time.

use std::collections::BTreeMap;
use std::collections::btree_map::Entry;
use std::sync::Arc;

use crate::engine::{BankView, History, HistoryError, Snapshot};
use crate::model::{Name, Time, US_PER_DAY, US_PER_S};
use crate::notice::{Kind, Notice};
use crate::verdict::{Digest, Finding};

use super::story;

/// Columns of a day.
pub const COLUMNS: usize = 48;
/// Length of one.
pub const COLUMN_US: i64 = US_PER_DAY / 48;
/// Nobody sees a band of half hours move.
const FRESH_US: i64 = 20 * US_PER_S;
/// Looks of one moment, one per span.
const NEWEST: usize = 8;

/// What the looks of a half hour, or its notices, say.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Half {
    /// No look.
    #[default]
    Nothing,
    /// Looks that could say nothing.
    Blind,
    /// Even.
    Even,
    /// A notice said that sources were apart.
    Apart,
}

/// A bank's last day.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct Day {
    /// Oldest first; the last one goes on.
    pub halves: Vec<Half>,
    /// Calls within the days of the bank's budget.
    pub calls: usize,
}

/// What was read so far.
#[derive(Default)]
pub struct Days {
    read: tokio::sync::Mutex<Read>,
}

#[derive(Clone, Default)]
struct Read {
    at: Option<Time>,
    looked: BTreeMap<Name, BTreeMap<i64, Half>>,
    days: Arc<BTreeMap<Name, Day>>,
}

impl Days {
    /// The last day of every bank.
    ///
    /// # Errors
    /// When the store cannot be read.
    pub async fn of(
        &self,
        history: &Arc<dyn History>,
        snapshot: &Arc<Snapshot>,
        now: Time,
    ) -> Result<Arc<BTreeMap<Name, Day>>, HistoryError> {
        let mut read = self.read.lock().await;
        let known = |b: &Arc<BankView>| read.days.contains_key(&b.bank.name);
        let fresh = read
            .at
            .is_some_and(|at| (0..FRESH_US).contains(&now.us_since(at)));
        if fresh && snapshot.banks.iter().all(known) {
            return Ok(read.days.clone());
        }
        let (history, before, present) = (history.clone(), read.clone(), snapshot.clone());
        let reading = move || go_on(history.as_ref(), before, &present, now);
        let done = tokio::task::spawn_blocking(reading).await;
        *read = done.map_err(|e| HistoryError(format!("reading ended early: {e}")))??;
        Ok(read.days.clone())
    }
}

/// Reads what is new since `before`.
fn go_on(
    history: &dyn History,
    before: Read,
    snapshot: &Snapshot,
    now: Time,
) -> Result<Read, HistoryError> {
    let last = now.us().div_euclid(COLUMN_US);
    let first = last + 1 - COLUMNS as i64;
    let longest = snapshot
        .banks
        .iter()
        .map(|b| b.bank.budget.days())
        .fold(1.0, f64::max);
    let back = now.plus_us(-days_us(longest));
    let notices = story::notices(history, None, (back, now.plus_us(1)))?;
    let mut looked = BTreeMap::new();
    let mut days = BTreeMap::new();
    for view in &snapshot.banks {
        let name = &view.bank.name;
        let mut halves = before.looked.get(name).cloned().unwrap_or_default();
        halves.retain(|column, _| (first..last).contains(column));
        for column in first..=last {
            if let Entry::Vacant(gap) = halves.entry(column) {
                let from = Time::from_us(column * COLUMN_US);
                let to = from.plus_us(COLUMN_US);
                gap.insert(half(&history.digests(name, from, to, NEWEST)?));
            }
        }
        let own: Vec<&Notice> = notices.iter().filter(|n| n.bank == *name).collect();
        days.insert(name.clone(), day(view, &halves, &own, now));
        looked.insert(name.clone(), halves);
    }
    Ok(Read {
        at: Some(now),
        looked,
        days: Arc::new(days),
    })
}

/// What the newest moment's looks say.
fn half(digests: &[Digest]) -> Half {
    let Some(newest) = digests.last() else {
        return Half::Nothing;
    };
    let says = |d: &&Digest| {
        d.at == newest.at && !matches!(d.finding, Finding::NotEnoughData | Finding::DependentData)
    };
    if digests.iter().any(|d| says(&d)) {
        Half::Even
    } else {
        Half::Blind
    }
}

fn day(view: &BankView, looked: &BTreeMap<i64, Half>, notices: &[&Notice], now: Time) -> Day {
    let calls_since = now.plus_us(-days_us(view.bank.budget.days()));
    let about = |n: &&&Notice| is_call(n.kind);
    let halves = looked.iter().map(|(column, half)| {
        let from = Time::from_us(column * COLUMN_US);
        let to = from.plus_us(COLUMN_US);
        let holds = |n: &&Notice| {
            let end = story::end(n).unwrap_or(now);
            is_call(n.kind) && n.raised < to && end >= from
        };
        if notices.iter().any(holds) {
            Half::Apart
        } else {
            *half
        }
    });
    Day {
        halves: halves.collect(),
        calls: notices
            .iter()
            .filter(about)
            .filter(|n| n.raised >= calls_since)
            .count(),
    }
}

/// Notices that the call budget is about.
fn is_call(kind: Kind) -> bool {
    matches!(kind, Kind::LevelApart | Kind::SpreadApart | Kind::BankSplit)
}

fn days_us(days: f64) -> i64 {
    // A budget for longer than people live is one for ever.
    (days.min(40_000.0) * US_PER_DAY as f64) as i64
}
