//! Store -> engine, as it was: checkpoints, then the turns after them through the same engine.
//!
//! A checkpoint that no longer fits its bank is told and passed over; the bank then starts with what
//! the journal still holds. What was set aside stays visible as the store's condition for a while.

use std::sync::Arc;

use tracing::{info, warn};

use crate::engine::{Engine, History, Plant, RestoreError};
use crate::notice::{Delivery, Way};
use crate::settings::Settings;
use crate::store::{Recovered, SetAside, Store};

use super::RunError;

/// Everything the daemon goes on from.
pub(super) struct Recovery {
    pub(super) engine: Engine,
    pub(super) store: Box<dyn Store>,
    pub(super) history: Arc<dyn History>,
    pub(super) outbox: Vec<Delivery>,
    /// Numbers of deliveries that nobody takes any more.
    pub(super) orphans: Vec<u64>,
    pub(super) unacknowledged: Vec<(u16, u64)>,
    pub(super) replayed: u64,
    pub(super) set_aside: Option<SetAside>,
}

/// Makes the engine what it was.
///
/// # Errors
/// When the journal cannot be read to its end.
pub(super) fn recover(
    settings: &Settings,
    store: impl Store + 'static,
    history: Arc<dyn History>,
    recovered: Recovered,
    set_aside: Option<SetAside>,
) -> Result<Recovery, RunError> {
    let plant = Plant {
        name: settings.plant.name.clone(),
        zone: settings.plant.zone.clone(),
        pages: settings.pages(),
        routes: settings.routes(),
        manners: settings.manners.clone(),
    };
    let mut engine = Engine::new(plant, settings.banks.clone());
    for (bank, _, state) in &recovered.checkpoints {
        match engine.restore(bank, state) {
            Ok(()) => {}
            Err(e @ RestoreError::NoSuchBank(_)) => info!("{e}"),
            Err(e) => {
                warn!("{e}; the bank goes on with what the journal holds");
                engine.number_notices_after(bank, last_number(&*history, bank));
            }
        }
    }
    let mut replayed = 0;
    for turn in recovered.turns {
        engine.replay(turn?);
        replayed += 1;
    }
    let known = |way: &Way| match way {
        Way::Mqtt => true,
        Way::Outlet(name) => settings.outlets.iter().any(|o| o.name == *name),
    };
    let (outbox, orphans): (Vec<_>, Vec<_>) =
        recovered.outbox.into_iter().partition(|d| known(&d.way));
    if let Some(one) = orphans.first() {
        let (count, name) = (orphans.len(), one.way.name());
        warn!(
            "{count} deliveries wait for outlets that are no longer configured (\"{name}\"): they \
             are dropped"
        );
    }
    engine.resume(recovered.last_turn, &outbox);
    Ok(Recovery {
        engine,
        store: Box::new(store),
        history,
        outbox,
        orphans: orphans.iter().map(|d| d.number).collect(),
        unacknowledged: recovered.unacknowledged,
        replayed,
        set_aside,
    })
}

/// Notices read at once.
const PAGE: usize = 500;

/// The largest running number among a bank's kept notices, so that no id is given twice; 0 when none
/// can be read.
fn last_number(history: &dyn History, bank: &str) -> u64 {
    let mut last = 0;
    let mut after = None;
    loop {
        let Ok(page) = history.notices(after.as_deref(), PAGE) else {
            return last;
        };
        let own = page.items.iter().filter(|n| &*n.bank == bank);
        let numbers = own.filter_map(|n| n.id.rsplit('-').next()?.parse().ok());
        last = numbers.fold(last, u64::max);
        after = page.next;
        if after.is_none() {
            return last;
        }
    }
}
