//! Takes deliveries to their outlet: what all ways besides the broker have in common.
//!
//! One attempt is under way at a time. What must hold: the house is never kept waiting, whatever the
//! other side does; a delivery is reported done only when the other side has confirmed it; what fails
//! is kept and tried again, and told once for each reason. Deliberately absent: how a letter travels,
//! which is the [`Carrier`]'s.

use std::future::Future;
use std::time::Duration;

use tracing::{debug, info, warn};

use crate::clock::Stopwatch;
use crate::model::Name;
use crate::settings::AtMost;

use super::door::{Came, Door};
use super::lanes::{Lanes, Next};
use super::letter::Letter;
use super::pace::Pace;
use super::retry::Schedule;
use super::{OutletError, Report};

/// How long the end may take: the whole program has 5 seconds.
const END_WITHIN: Duration = Duration::from_secs(2);

/// No receiver can ask for a longer quiet.
const LONGEST_QUIET: Duration = Duration::from_secs(24 * 3600);

/// How letters travel.
pub trait Carrier: Send + Sync {
    /// Takes a letter to the other side; `Ok` when that has confirmed it.
    ///
    /// # Errors
    /// Why it did not arrive, as far as can be known.
    fn carry(&self, letter: &Letter) -> impl Future<Output = Result<(), Failure>> + Send;
}

/// Why a letter did not arrive, and what follows.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Failure {
    /// Why, for people, with what to do where that is known.
    pub why: String,
    /// What follows.
    pub then: Then,
}

/// What follows from a failure.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Then {
    /// It is tried again by the schedule.
    Retry,
    /// The other side wants to be left alone this long.
    Quiet(Duration),
    /// The other side wants nothing more.
    Close,
}

impl Failure {
    /// One that is tried again by the schedule.
    pub fn new(why: impl Into<String>) -> Self {
        Self {
            why: why.into(),
            then: Then::Retry,
        }
    }
}

/// The postman of one outlet.
pub struct Postman {
    name: Name,
    door: Door,
    lanes: Lanes,
    pace: Pace,
    /// Something had to wait for the pace, so what is due goes together.
    is_held_back: bool,
    complaint: Option<String>,
    /// Runs from the start; every time here is counted on it.
    watch: Stopwatch,
    ending: Option<Stopwatch>,
}

/// How an attempt ended.
enum Attempt {
    Arrived,
    Failed(Failure),
    /// The end came first.
    CutOff,
}

impl Postman {
    /// Nothing is carried yet.
    pub fn new(name: Name, at_most: Option<AtMost>, schedule: Schedule, door: Door) -> Self {
        Self {
            name,
            door,
            lanes: Lanes::new(schedule),
            pace: Pace::new(at_most),
            is_held_back: false,
            complaint: None,
            watch: Stopwatch::start(),
            ending: None,
        }
    }

    /// Carries what comes through the door until the end is wanted.
    ///
    /// # Errors
    /// When nobody takes the reports any more.
    pub async fn walk(mut self, carrier: &impl Carrier) -> Result<(), OutletError> {
        while let Some(wait) = self.wait() {
            if wait.is_zero()
                && let Some(letter) = self.take()
            {
                self.attempt(carrier, letter).await?;
            } else {
                self.serve(wait).await?;
            }
        }
        self.door.close().await;
        Ok(())
    }

    /// How long there is nothing to send; `None` when it is time to go.
    fn wait(&mut self) -> Option<Duration> {
        let now = self.watch.elapsed();
        let wait = match self.lanes.next(now) {
            Next::Now => self.pace.wait(now).unwrap_or_default(),
            Next::In(wait) => wait,
            Next::Never => Duration::MAX,
        };
        self.is_held_back |= self.lanes.next(now) == Next::Now && !wait.is_zero();
        let over = |e: Stopwatch| !wait.is_zero() || e.elapsed() >= END_WITHIN;
        (!self.ending.is_some_and(over)).then_some(wait)
    }

    fn take(&mut self) -> Option<Letter> {
        let now = self.watch.elapsed();
        if std::mem::take(&mut self.is_held_back) && self.lanes.due(now) > 1 {
            self.lanes.take_all(now)
        } else {
            self.lanes.take_one()
        }
    }

    /// Serves the house until the wait is over or something came.
    async fn serve(&mut self, wait: Duration) -> Result<(), OutletError> {
        // Timers have an end; whatever waits longer is looked at again.
        let wait = wait.min(LONGEST_QUIET);
        tokio::select! {
            came = self.door.next() => self.came(came?),
            () = tokio::time::sleep(wait) => {}
        }
        Ok(())
    }

    fn came(&mut self, came: Came) {
        match came {
            Came::Delivery(delivery) => self.lanes.push(delivery, self.watch.elapsed()),
            Came::End => self.ending = Some(Stopwatch::start()),
            Came::Nothing => {}
        }
    }

    /// One attempt, while the house is served.
    async fn attempt(&mut self, carrier: &impl Carrier, letter: Letter) -> Result<(), OutletError> {
        let carried = carrier.carry(&letter);
        tokio::pin!(carried);
        let how = loop {
            let end = self.ending.map(|e| END_WITHIN.saturating_sub(e.elapsed()));
            tokio::select! {
                done = &mut carried => break match done {
                    Ok(()) => Attempt::Arrived,
                    Err(failure) => Attempt::Failed(failure),
                },
                came = self.door.next() => self.came(came?),
                () = tokio::time::sleep(end.unwrap_or_default()), if end.is_some() => {
                    break Attempt::CutOff;
                }
            }
        };
        let now = self.watch.elapsed();
        match how {
            Attempt::Arrived => self.arrived(&letter, now),
            Attempt::Failed(failure) => self.failed(&letter, failure, now),
            Attempt::CutOff => self.lanes.failed(now, 0.0),
        }
        Ok(())
    }

    fn arrived(&mut self, letter: &Letter, now: Duration) {
        self.pace.sent(now);
        for number in self.lanes.confirmed(now) {
            self.door.report(Report::Delivered(number));
        }
        let (name, id) = (&self.name, letter.id());
        match self.complaint.take() {
            Some(_) => info!("outlet \"{name}\" takes notices again ({id})"),
            None => debug!("outlet \"{name}\" has taken {id}"),
        }
    }

    fn failed(&mut self, letter: &Letter, failure: Failure, now: Duration) {
        let Failure { why, then } = failure;
        self.lanes.failed(now, fastrand::f64());
        match then {
            Then::Retry => {}
            Then::Quiet(wait) => self.lanes.be_quiet(now + wait.min(LONGEST_QUIET)),
            Then::Close => self.lanes.close(),
        }
        let (name, waiting) = (&self.name, self.lanes.len());
        let next = match self.lanes.next(now) {
            Next::Now => "tried again at once".to_owned(),
            Next::In(wait) => format!("tried again in {wait:.0?}"),
            Next::Never => "kept until evenrow is started again".to_owned(),
        };
        let is_known = self.complaint.as_ref() == Some(&why);
        if is_known {
            debug!("outlet \"{name}\" still takes no notices: {why}; {waiting} wait, {next}");
        } else {
            warn!("outlet \"{name}\" takes no notices: {why}; {waiting} wait, {next}");
        }
        let number = letter.first().number;
        self.complaint = Some(why.clone());
        self.door.report(Report::NotDelivered { number, why });
    }
}

#[cfg(test)]
mod tests;
