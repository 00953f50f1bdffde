//! What can happen to the engine, and what it wants done.

use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{BankIx, LineChange, LineEvent, Measurement, Name, Refusal, SourceIx, Time};
use crate::notice::{Deed, Delivery, Kind, Notice, Trouble};
use crate::verdict::{Digest, Look};

use super::condition::{Condition, Part};
use super::evidence::Evidence;
use super::snapshot::WindowView;

/// Links a command to the person who waits for its answer; only the daemon knows who that is.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
pub struct Ticket(pub u64);

/// Everything that can happen.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Event {
    /// Measurements, in the order in which they arrived.
    Measurements(Vec<Measurement>),
    /// Arrivals that intake refused; counted and shown, never kept.
    Refusals(Vec<Refusal>),
    /// A moment that [`super::Engine::next_deadline`] asked for has come.
    Deadline,
    /// What a deadline came down to: the form in which the journal holds it, so that a replay does
    /// exactly the same.
    Due(Due),
    /// A person asks for something.
    Command {
        /// Comes back with the answer.
        ticket: Ticket,
        /// The person's name as given.
        who: Name,
        /// What is asked.
        what: Command,
    },
    /// An outlet has confirmed a delivery.
    Delivered {
        /// [`Delivery::number`].
        number: u64,
    },
    /// An outlet could not deliver and will try again.
    NotDelivered {
        /// [`Delivery::number`].
        number: u64,
        /// Why, for people.
        why: String,
    },
    /// A part of the house or of the plant's network works or does not.
    Condition {
        /// Which part.
        part: Part,
        /// How it is.
        condition: Condition,
    },
}

/// What was due at a deadline.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Due {
    /// Sources that have fallen silent.
    pub silent: Vec<(BankIx, SourceIx)>,
    /// Banks to look at.
    pub looks: Vec<BankIx>,
    /// Notices that go to a further outlet.
    pub onward: Vec<Onward>,
    /// Banks to whose notices time brings something.
    pub upkeep: Vec<BankIx>,
    /// Conditions that have begun, changed or gone.
    pub conditions: Vec<Judged>,
}

/// What a condition of a bank has come to.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Judged {
    /// The bank.
    pub bank: BankIx,
    /// Which condition.
    pub kind: Kind,
    /// What is wrong; nothing when it is gone.
    pub troubles: Vec<Trouble>,
}

/// A notice that has stood unacknowledged for long enough, or whose outlet's shift has begun.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Onward {
    /// Its bank.
    pub bank: BankIx,
    /// [`Notice::id`].
    pub notice: Name,
    /// Where it goes.
    pub outlet: Name,
}

/// What a person can ask for.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum Command {
    /// Do something with a notice.
    Notice {
        /// [`Notice::id`].
        notice: Name,
        /// What.
        deed: Deed,
        /// What the person wrote; may be empty.
        comment: String,
    },
    /// Take in a line event.
    Line {
        /// Which bank.
        bank: BankIx,
        /// What happened.
        change: LineChange,
        /// Why, as the person wrote it; may be empty.
        reason: String,
    },
    /// The values in a bank's windows. Changes nothing.
    Windows {
        /// Which bank.
        bank: BankIx,
    },
    /// What a look at the bank would rest on now, with that look. Changes nothing.
    Evidence {
        /// Which bank.
        bank: BankIx,
    },
}

/// The answer to a command.
#[derive(Clone, Debug, PartialEq)]
pub enum Outcome {
    /// Done; the notice as it stands now. Asking twice gives the same.
    Notice(Arc<Notice>),
    /// Taken in; the line event as it is kept.
    Line(LineEvent),
    /// The bank's windows, sources in display order.
    Windows(Vec<WindowView>),
    /// A look taken just now, and what it rests on.
    Evidence(Box<Evidence>),
    /// There is no such thing; says what.
    NotFound(String),
    /// It cannot be done now; says why.
    Refused(String),
}

/// One applied event with its number and time: what the journal holds. Replaying the turns after a
/// checkpoint through the engine rebuilds its state to the last bit.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Turn {
    /// Rises by one for each turn kept.
    pub number: u64,
    /// The time the engine was given.
    pub now: Time,
    /// What happened, without what was refused.
    pub event: Event,
}

/// What is to be kept.
#[derive(Clone, Debug, PartialEq)]
pub enum Record {
    /// For the journal.
    Turn(Turn),
    /// A bank's whole state; turns up to and including `turn` are in it.
    Checkpoint {
        /// The bank's name.
        bank: Name,
        /// The last turn that is contained.
        turn: u64,
        /// The state, encoded by the engine ([`super::Engine::restore`] reads it).
        state: Vec<u8>,
    },
    /// The short form of a look of this bank.
    Digest(Name, Digest),
    /// A line event of this bank; the turn tells those of one moment apart.
    Line {
        /// The bank's name.
        bank: Name,
        /// The turn that brought it.
        turn: u64,
        /// What happened.
        event: LineEvent,
    },
    /// A look worth keeping whole.
    Look(Arc<Look>),
    /// A notice as it stands now; replaces what was kept under its id.
    Notice(Arc<Notice>),
    /// What a notice rests on: its look, and the values in the windows at the call.
    Evidence {
        /// [`Notice::id`].
        notice: Name,
        /// What the call rests on.
        evidence: Box<Evidence>,
    },
    /// Into the outbox.
    Delivery(Delivery),
    /// Out of the outbox.
    Delivered {
        /// [`Delivery::number`].
        number: u64,
    },
}

/// What the engine wants done. The daemon performs them in this order: all `Keep` in one synced
/// batch, then acknowledgements to the broker, the snapshot, answers, the outbox.
#[derive(Clone, Debug, PartialEq)]
pub enum Effect {
    /// Keep this.
    Keep(Record),
    /// Answer a person.
    Answer {
        /// Whom.
        ticket: Ticket,
        /// What to say.
        outcome: Outcome,
    },
    /// Send this (it is kept too, as [`Record::Delivery`]).
    Deliver(Delivery),
}
