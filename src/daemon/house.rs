//! Applies turns: the engine says what is to be done, and it is done in the order that makes
//! "acknowledged" mean "durable".
//!
//! Owns engine and store. A commit that fails is tried again until it works or the end is wanted;
//! meanwhile nothing is taken in, and the present says why.

use std::collections::BTreeMap;
use std::sync::Arc;
use std::time::Duration;

use tokio::sync::{mpsc, oneshot, watch};
use tokio_util::sync::CancellationToken;
use tracing::{error, info, warn};

use crate::clock::{Clock, Stopwatch};
use crate::engine::{Condition, Effect, Engine, Event, Outcome, Part, Record, Snapshot, Ticket};
use crate::intake::mqtt::Receipt;
use crate::model::Name;
use crate::notice::{Delivery, Way};
use crate::store::{Batch, Retained, SetAside, Store};
use crate::web::{Ask, Durations};

use super::RunError;
use super::recovery::Recovery;
use super::unsettled::Unsettled;

/// The present is published at most ten times a second.
const PUBLISH_EVERY: Duration = Duration::from_millis(100);

/// Old records are dropped once a minute, and soon again while there are more.
const TIDY_EVERY: Duration = Duration::from_secs(60);
const TIDY_SOON: Duration = Duration::from_millis(250);

/// A failed commit is tried again after this long, twice as long after each further failure.
const RETRY_FIRST: Duration = Duration::from_millis(250);
const RETRY_MOST: Duration = Duration::from_secs(10);

/// How long the store's condition tells that a damaged one was set aside.
const ASIDE_SHOWN: Duration = Duration::from_secs(600);

/// Where the effects go.
pub(super) struct Ways {
    /// To the broker, as acknowledgements.
    pub(super) receipts: mpsc::Sender<Vec<Receipt>>,
    /// To each way out.
    pub(super) deliveries: BTreeMap<Way, mpsc::Sender<Delivery>>,
    /// To pages and metrics.
    pub(super) present: watch::Sender<Arc<Snapshot>>,
}

/// What is applied together and kept with one commit.
#[derive(Default)]
pub(super) struct Pending {
    /// What happened, in order.
    pub(super) events: Vec<Event>,
    /// The messages that it came from.
    pub(super) receipts: Vec<Receipt>,
}

/// What the engine wants done.
#[derive(Default)]
struct Todo {
    records: Vec<Record>,
    answers: Vec<(Ticket, Outcome)>,
    deliveries: Vec<Delivery>,
}

impl Todo {
    fn take(&mut self, effects: Vec<Effect>) {
        for effect in effects {
            match effect {
                Effect::Keep(record) => self.records.push(record),
                Effect::Answer { ticket, outcome } => self.answers.push((ticket, outcome)),
                Effect::Deliver(delivery) => self.deliveries.push(delivery),
            }
        }
    }
}

/// Owns engine and store.
pub(super) struct House {
    engine: Engine,
    store: Box<dyn Store>,
    clock: Clock,
    durations: Durations,
    unsettled: Unsettled,
    ways: Ways,
    replies: BTreeMap<Ticket, oneshot::Sender<Outcome>>,
    tickets: u64,
    /// What was asked for outside of a turn and goes with the next.
    owed: Todo,
    /// Since when the present that pages see is out.
    published: Stopwatch,
    tidied: Stopwatch,
    tidy_after: Duration,
    aside: Option<(SetAside, Stopwatch)>,
}

impl House {
    /// From what was recovered; `most_in_flight` messages may be unacknowledged at the broker.
    pub(super) fn new(
        recovery: Recovery,
        clock: Clock,
        durations: Durations,
        most_in_flight: usize,
        ways: Ways,
    ) -> Self {
        let gone = recovery.orphans.into_iter();
        let owed = Todo {
            records: gone.map(|number| Record::Delivered { number }).collect(),
            deliveries: recovery.outbox,
            ..Todo::default()
        };
        let mut house = Self {
            engine: recovery.engine,
            store: recovery.store,
            clock,
            durations,
            unsettled: Unsettled::new(recovery.unacknowledged, most_in_flight),
            ways,
            replies: BTreeMap::new(),
            tickets: 0,
            owed,
            published: Stopwatch::start(),
            tidied: Stopwatch::start(),
            tidy_after: TIDY_SOON,
            aside: recovery.set_aside.map(|a| (a, Stopwatch::start())),
        };
        let condition = house.resting();
        house.tell_store(condition);
        house.publish_now();
        house
    }

    /// The first turn: what the outbox held is sent again, and what was replayed need not be again.
    pub(super) async fn begin(&mut self, end: &CancellationToken) -> Result<(), RunError> {
        let checkpoints = self.engine.checkpoints(self.clock.now());
        self.owed.records.extend(checkpoints);
        self.turn(Pending::default(), end).await
    }

    /// Notes who waits for an answer, and makes the event of it.
    pub(super) fn command(&mut self, ask: Ask) -> Event {
        let Ask { who, what, reply } = ask;
        self.tickets += 1;
        let ticket = Ticket(self.tickets);
        self.replies.insert(ticket, reply);
        Event::Command { ticket, who, what }
    }

    /// How long nothing is due by itself; `None` when nothing will be.
    pub(super) fn idle(&self) -> Option<Duration> {
        let now = self.clock.now();
        let deadline = self.engine.next_deadline().map(|at| at.wait_from(now));
        let publish = self
            .is_unpublished()
            .then(|| PUBLISH_EVERY.saturating_sub(self.published.elapsed()));
        let tidy = self.tidy_after.saturating_sub(self.tidied.elapsed());
        [deadline, publish, Some(tidy)].into_iter().flatten().min()
    }

    /// Does what is due by itself.
    pub(super) async fn chores(&mut self, end: &CancellationToken) -> Result<(), RunError> {
        let now = self.clock.now();
        if self.engine.next_deadline().is_some_and(|at| at <= now) {
            let events = vec![Event::Deadline];
            let pending = Pending {
                events,
                ..Pending::default()
            };
            self.turn(pending, end).await?;
        }
        if let Some((_, since)) = &self.aside
            && since.elapsed() >= ASIDE_SHOWN
        {
            self.aside = None;
            self.tell_store(Condition::Well);
        }
        if self.tidied.elapsed() >= self.tidy_after {
            self.tidy();
        }
        self.publish();
        Ok(())
    }

    /// Applies what happened and performs the effects. The clock is read once.
    pub(super) async fn turn(
        &mut self,
        pending: Pending,
        end: &CancellationToken,
    ) -> Result<(), RunError> {
        let Pending { events, receipts } = pending;
        let now = self.clock.now();
        let mut todo = std::mem::take(&mut self.owed);
        for event in events {
            let is_deadline = event == Event::Deadline;
            let took = Stopwatch::start();
            let effects = self.engine.handle(event, now);
            if is_deadline {
                self.observe_looks(&effects, took.elapsed());
            }
            todo.take(effects);
        }
        self.unsettled.add(&receipts);
        self.keep(todo.records, end).await?;
        // Whoever is gone has ended, which is told by name where tasks are looked after.
        if !receipts.is_empty() {
            let _ = self.ways.receipts.send(receipts).await;
        }
        if todo.answers.is_empty() {
            self.publish();
        } else {
            // Whoever is answered and looks again sees what the answer said.
            self.publish_now();
        }
        for (ticket, outcome) in todo.answers {
            if let Some(reply) = self.replies.remove(&ticket) {
                // Whoever asked may have left.
                let _ = reply.send(outcome);
            }
        }
        for delivery in todo.deliveries {
            if let Some(way) = self.ways.deliveries.get(&delivery.way) {
                let _ = way.send(delivery).await;
            }
        }
        Ok(())
    }

    fn observe_looks(&self, effects: &[Effect], took: Duration) {
        let mut banks: Vec<&Name> = Vec::new();
        for effect in effects {
            if let Effect::Keep(Record::Digest(bank, _)) = effect
                && !banks.contains(&bank)
            {
                banks.push(bank);
            }
        }
        let count = u32::try_from(banks.len()).unwrap_or(u32::MAX);
        for _ in 0..count {
            self.durations.observe_look(took / count);
        }
    }

    /// Returns when the records are durable. What was only refused needs no commit: delivered
    /// again it would be refused again.
    async fn keep(
        &mut self,
        records: Vec<Record>,
        end: &CancellationToken,
    ) -> Result<(), RunError> {
        if records.is_empty() {
            return Ok(());
        }
        let batch = Batch {
            records,
            unacknowledged: self.unsettled.pairs(),
        };
        let mut wait = RETRY_FIRST;
        let mut said = None;
        loop {
            let last_attempt = end.is_cancelled();
            let took = Stopwatch::start();
            let why = match self.store.commit(&batch) {
                Ok(()) => {
                    self.durations.observe_commit(took.elapsed());
                    break;
                }
                Err(e) => e.to_string(),
            };
            if last_attempt {
                return Err(RunError::Unkept(why));
            }
            self.tell_trouble(&why, &mut said);
            tokio::select! {
                () = tokio::time::sleep(wait) => {}
                () = end.cancelled() => {}
            }
            wait = (wait * 2).min(RETRY_MOST);
        }
        if said.is_some() {
            info!("the store works again");
            let condition = self.resting();
            self.tell_store(condition);
        }
        Ok(())
    }

    /// Tells the log once for each reason, and the present.
    fn tell_trouble(&mut self, why: &str, said: &mut Option<String>) {
        if said.as_deref() == Some(why) {
            return;
        }
        error!("{why}; nothing is taken in until the store works again, tried until then");
        *said = Some(why.to_owned());
        self.tell_store(Condition::Trouble(format!(
            "{why}. Nothing is taken in meanwhile and nothing is acknowledged, so the broker keeps \
             it. Check that the disk has room and that the store's folder can be written."
        )));
        self.publish_now();
    }

    /// The store's condition while it works.
    fn resting(&self) -> Condition {
        match &self.aside {
            None => Condition::Well,
            Some((SetAside { path, why }, _)) => Condition::Noted(format!(
                "It was found damaged at the start ({why}) and set aside as {}. evenrow goes on \
                 with a fresh one: windows and notices began anew.",
                path.display()
            )),
        }
    }

    fn tell_store(&mut self, condition: Condition) {
        let part = Part::Store;
        let event = Event::Condition { part, condition };
        let effects = self.engine.handle(event, self.clock.now());
        self.owed.take(effects);
    }

    fn is_unpublished(&self) -> bool {
        self.engine.has_changed()
    }

    fn publish(&mut self) {
        if self.is_unpublished() && self.published.elapsed() >= PUBLISH_EVERY {
            self.publish_now();
        }
    }

    fn publish_now(&mut self) {
        self.published = Stopwatch::start();
        self.ways.present.send_replace(self.engine.snapshot());
    }

    fn tidy(&mut self) {
        self.tidy_after = match self.store.retain(self.clock.now()) {
            Ok(Retained::More(_)) => TIDY_SOON,
            Ok(Retained::Done(_)) => TIDY_EVERY,
            Err(e) => {
                warn!("{e}; tried again in a minute");
                TIDY_EVERY
            }
        };
        self.tidied = Stopwatch::start();
    }

    /// The last turn: every bank writes its state. Nothing is sent or acknowledged afterwards.
    pub(super) async fn finish(mut self, end: &CancellationToken) -> Result<Last, RunError> {
        let checkpoints = self.engine.checkpoints(self.clock.now());
        self.owed.records.extend(checkpoints);
        self.turn(Pending::default(), end).await?;
        self.publish_now();
        let Self {
            engine,
            store,
            clock,
            unsettled,
            ..
        } = self;
        Ok(Last {
            engine,
            store,
            clock,
            unsettled,
        })
    }
}

/// What is left after the last turn: it takes the outlet's last confirmations.
pub(super) struct Last {
    engine: Engine,
    store: Box<dyn Store>,
    clock: Clock,
    unsettled: Unsettled,
}

impl Last {
    /// Takes confirmed deliveries off the outbox.
    pub(super) fn confirm(mut self, confirmed: Vec<Event>) -> Result<(), RunError> {
        let now = self.clock.now();
        let mut todo = Todo::default();
        for event in confirmed {
            todo.take(self.engine.handle(event, now));
        }
        let batch = Batch {
            records: todo.records,
            unacknowledged: self.unsettled.pairs(),
        };
        self.store
            .commit(&batch)
            .map_err(|e| RunError::Unkept(e.to_string()))
    }
}
