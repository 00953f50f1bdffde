//! Gives the engine its turns: the recording's times are the present.
//!
//! `now` is the largest time seen; everything with the same `now` is one turn, and the deadlines that
//! lie between two turns come in their order, as they would have in the daemon. Deliberately absent:
//! reading, and telling what came of it.

use std::io;
use std::sync::Arc;

use crate::engine::{BankView, Effect, Engine, Event, Record};
use crate::model::{Measurement, Refusal, Time};

use super::ledger::{Ledger, Said};

/// Receives everything the engine says, as it is said.
pub type Hear<'a> = &'a mut dyn FnMut(&Said) -> io::Result<()>;

/// Feeds an engine.
pub struct Conductor {
    engine: Engine,
    /// The largest time seen; `None` before the first measurement.
    now: Option<Time>,
    /// The time last given to the engine, which never goes back.
    given: Time,
    turn: Vec<Measurement>,
}

impl Conductor {
    /// Before the first measurement.
    pub fn new(engine: Engine) -> Self {
        Self {
            engine,
            now: None,
            given: Time::default(),
            turn: Vec::new(),
        }
    }

    /// The next measurement in the order of the recording.
    ///
    /// # Errors
    /// When what was said cannot be told.
    pub fn take(&mut self, next: Measurement, ledger: &mut Ledger, hear: Hear) -> io::Result<()> {
        let taken = next.taken.or(self.now).unwrap_or_default();
        if self.now.is_none_or(|now| taken > now) {
            self.end_turn(ledger, hear)?;
            self.now = Some(taken);
        }
        self.turn.push(next);
        Ok(())
    }

    /// A row that is no measurement.
    ///
    /// # Errors
    /// When what was said cannot be told.
    pub fn refused(&mut self, refusal: Refusal, ledger: &mut Ledger, hear: Hear) -> io::Result<()> {
        let now = self.now.unwrap_or_default();
        self.give(Event::Refusals(vec![refusal]), now, ledger, hear)
    }

    /// Ends the last turn and looks at what is there.
    ///
    /// # Errors
    /// When what was said cannot be told.
    pub fn finish(&mut self, ledger: &mut Ledger, hear: Hear) -> io::Result<()> {
        self.end_turn(ledger, hear)?;
        let now = self.now.unwrap_or_default();
        for look in self.engine.look_now(now) {
            ledger.last_look(&look);
            hear(&Said::Look(look))?;
        }
        ledger.banks(&self.engine.snapshot());
        Ok(())
    }

    /// What the engine knows of a bank, by its place in the configuration.
    pub fn bank(&mut self, at: usize) -> Arc<BankView> {
        self.engine.snapshot().banks[at].clone()
    }

    /// The engine's turn: first the deadlines up to it, then what arrived.
    fn end_turn(&mut self, ledger: &mut Ledger, hear: Hear) -> io::Result<()> {
        let Some(now) = self.now.filter(|_| !self.turn.is_empty()) else {
            return Ok(());
        };
        while let Some(due) = self.engine.next_deadline().filter(|due| *due < now) {
            // What was due before the engine knew of it comes late, as in the daemon.
            let at = due.max(self.given);
            self.give(Event::Deadline, at, ledger, hear)?;
            if self.engine.next_deadline() <= Some(due) {
                // The engine has its answer; asking it the same again would never end.
                break;
            }
        }
        let turn = std::mem::take(&mut self.turn);
        self.give(Event::Measurements(turn), now, ledger, hear)
    }

    fn give(&mut self, event: Event, now: Time, ledger: &mut Ledger, hear: Hear) -> io::Result<()> {
        self.given = self.given.max(now);
        for effect in self.engine.handle(event, now) {
            if let Some(said) = said(effect) {
                ledger.said(&said);
                hear(&said)?;
            }
        }
        Ok(())
    }
}

/// What of the engine's wishes is worth telling.
fn said(effect: Effect) -> Option<Said> {
    match effect {
        Effect::Keep(Record::Digest(bank, digest)) => Some(Said::Digest(bank, digest.finding)),
        Effect::Keep(Record::Look(look)) => Some(Said::Look(look)),
        Effect::Keep(Record::Notice(notice)) => Some(Said::Notice(notice)),
        Effect::Keep(_) | Effect::Answer { .. } | Effect::Deliver(_) => None,
    }
}
