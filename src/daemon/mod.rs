//! Wiring: the loop that waits and the loop that applies, recovery, named tasks, the end.
//!
//! | part | what it is for |
//! | --- | --- |
//! | [`run`] | opens the store, recovers, starts the tasks, sees them to their end |
//! | `recovery` | store -> engine, as it was |
//! | `waiting` | waits for feed, deadline, command, report or the end, and makes turns of them |
//! | `house` | applies a turn: engine, store, and the effects in their order |
//! | `unsettled` | messages that are durable and perhaps not acknowledged |
//! | `tasks` | who runs, by name; the first unexpected end stops all |
//!
//! What must hold:
//! - One thread owns engine and store. Nobody else changes anything.
//! - Effects are performed in this order: keep (one synced batch), acknowledge, snapshot, answers,
//!   outbox. A notice is on the disk before it is sent, a message before it is acknowledged.
//! - While the store cannot keep, nothing new is taken in; pages go on and say so.
//! - The end takes less than five seconds, whatever hangs.
//!
//! Deliberately absent: any judgement on measurements, and any knowledge of what travels over MQTT
//! or HTTP.

mod house;
mod recovery;
mod tasks;
mod unsettled;
mod waiting;

use std::collections::BTreeMap;
use std::sync::Arc;

use tokio::net::TcpListener;
use tokio::sync::{mpsc, watch};
use tokio_util::sync::CancellationToken;
use tracing::{error, info, warn};

use crate::clock::{Clock, Stopwatch};
use crate::engine::Snapshot;
use crate::intake;
use crate::model::Name;
use crate::notice::Way;
use crate::outlets;
use crate::settings::Settings;
use crate::store::{self, OpenError, Opened, ReadError};
use crate::web::{self, Durations, Site};

use house::{House, Ways};
use recovery::Recovery;
use tasks::Tasks;
use waiting::Inputs;

/// Turns take at most this many arrivals: enough to drain a backlog at the disk's pace, few enough
/// to answer a person within a fraction of a second.
const MOST_ARRIVALS: usize = 1_000;
/// Measurements after which a turn takes no further message: one message may carry thousands of them.
const MOST_MEASUREMENTS: usize = 20_000;

/// Commands and reports that may wait. Each sender waits when this is full.
const MOST_WAITING: usize = 64;

/// Why the daemon did not run, or stopped.
#[derive(Debug, thiserror::Error)]
pub enum RunError {
    /// The store does not open.
    #[error(transparent)]
    Open(#[from] OpenError),
    /// What the store holds cannot be gone on from.
    #[error("recovery stopped: {0}")]
    Recover(#[from] ReadError),
    /// The metrics' histograms cannot be made.
    #[error(transparent)]
    Durations(web::ServeError),
    /// A task ended although nobody asked for it.
    #[error("task \"{name}\" ended unexpectedly: {why}")]
    Task {
        /// Its name.
        name: Name,
        /// Why.
        why: String,
    },
    /// The store could not keep what was under way at the end.
    #[error("the last turn could not be kept, so its messages will be delivered again: {0}")]
    Unkept(String),
    /// The work on a thread of its own broke off.
    #[error("opening the store broke off: {0}")]
    BrokenOff(String),
}

/// Runs until `shutdown`, then ends within five seconds.
///
/// # Errors
/// When the store does not open or a task ends unexpectedly; everything else is retried and said.
pub async fn run(
    settings: Arc<Settings>,
    clock: Clock,
    listener: TcpListener,
    shutdown: CancellationToken,
) -> Result<(), RunError> {
    let reading = tokio::task::spawn_blocking({
        let (settings, clock) = (Arc::clone(&settings), clock.clone());
        move || open_and_recover(&settings, &clock)
    });
    let recovery = tokio::select! {
        done = reading => done.map_err(|e| RunError::BrokenOff(e.to_string()))??,
        // Reading changes nothing, so the process may go while it goes on.
        () = shutdown.cancelled() => return Ok(()),
    };
    let durations = Durations::new().map_err(RunError::Durations)?;
    let mut tasks = Tasks::new(shutdown);
    start(settings, clock, listener, recovery, durations, &mut tasks);
    tell_service_manager(sd_notify::NotifyState::Ready);
    let ended = tasks.see_to_the_end().await;
    info!("ended");
    ended
}

/// Opens the store and makes the engine what it was.
fn open_and_recover(settings: &Settings, clock: &Clock) -> Result<Recovery, RunError> {
    let took = Stopwatch::start();
    let banks: Vec<Name> = settings.banks.iter().map(|b| b.name.clone()).collect();
    let opened = store::open(&settings.store, &banks, clock.now())?;
    let (scanned, set_aside) = (opened.recovered.scanned, opened.set_aside.clone());
    if let Some(aside) = &set_aside {
        let path = aside.path.display();
        error!(
            "the store was damaged ({}); it was set aside as {path} and a fresh one was begun: \
             windows and notices start anew, keep the folder for whoever looks into it",
            aside.why
        );
    }
    let Opened {
        store,
        history,
        recovered,
        ..
    } = opened;
    let recovery = recovery::recover(settings, store, history, recovered, set_aside)?;
    info!(
        "store read in {:.1?}: {} records of {} bytes, {} turns replayed, {} deliveries to be sent",
        took.elapsed(),
        scanned.records,
        scanned.bytes,
        recovery.replayed,
        recovery.outbox.len(),
    );
    Ok(recovery)
}

/// Starts every task.
fn start(
    settings: Arc<Settings>,
    clock: Clock,
    listener: TcpListener,
    mut recovery: Recovery,
    durations: Durations,
    tasks: &mut Tasks,
) {
    // The feed holds what the broker may send without an acknowledgement, so that the task that
    // polls the connection never waits while a disk is slow.
    let most_in_flight = usize::from(settings.broker.receive_maximum).max(MOST_ARRIVALS);
    let (feed_in, feed) = mpsc::channel(most_in_flight);
    let (receipts, receipts_out) = mpsc::channel(MOST_WAITING);
    let (asks_in, asks) = mpsc::channel(MOST_WAITING);
    let (mqtt, mqtt_out) = mpsc::channel(MOST_WAITING);
    let mut deliveries = BTreeMap::from([(Way::Mqtt, mqtt)]);
    let (reports_in, reports) = mpsc::channel(MOST_WAITING);

    let already = recovery.unacknowledged.clone();
    let history = Arc::clone(&recovery.history);
    let (present, snapshot) = watch::channel(recovery.engine.snapshot());
    let end = tasks.end();
    for outlet in &settings.outlets {
        let (way, taken) = mpsc::channel(MOST_WAITING);
        deliveries.insert(Way::Outlet(outlet.name.clone()), way);
        let picture = picture(snapshot.clone());
        let run = outlets::run(
            outlet.clone(),
            picture,
            taken,
            reports_in.clone(),
            end.clone(),
        );
        tasks.start(format!("outlet {}", outlet.name), run);
    }
    let ways = Ways {
        receipts,
        deliveries,
        present,
    };
    let house = House::new(
        recovery,
        clock.clone(),
        durations.clone(),
        most_in_flight,
        ways,
    );

    let runtime = tokio::runtime::Handle::current();
    let inputs = Inputs {
        feed,
        asks,
        reports,
    };
    tasks.start_blocking("engine", {
        let end = end.clone();
        move || runtime.block_on(waiting::turns(house, inputs, end))
    });
    tasks.start(
        "notices",
        outlets::mqtt::run(Arc::clone(&settings), mqtt_out, reports_in, end.clone()),
    );
    tasks.start(
        "broker",
        intake::mqtt::run(
            Arc::clone(&settings),
            already,
            feed_in,
            receipts_out,
            end.clone(),
        ),
    );
    let site = Site {
        settings,
        snapshot,
        history,
        asks: asks_in,
        durations,
        clock,
    };
    tasks.start("pages", web::serve(listener, site, end));
}

/// How the sources of a notice's bank stand now, for whoever reads of it.
fn picture(present: watch::Receiver<Arc<Snapshot>>) -> outlets::Picture {
    Arc::new(move |notice| {
        let present = Arc::clone(&present.borrow());
        let bank = present.banks.iter().find(|b| b.bank.name == notice.bank)?;
        web::picture_of(bank, notice)
    })
}

/// Without a service manager this does nothing.
fn tell_service_manager(state: sd_notify::NotifyState<'_>) {
    if let Err(e) = sd_notify::notify(&[state]) {
        warn!("the service manager cannot be told that evenrow runs: {e}");
    }
}

#[cfg(test)]
mod tests;
