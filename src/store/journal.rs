//! Commits: the records of one turn become one synced batch.
//!
//! What must hold: parts lie before the head that names them, the turn and the list of messages not
//! yet acknowledged come last and together, and doing a whole commit again changes nothing. So a
//! crash between two batches of a long commit leaves at most parts that nobody names.

use std::sync::Arc;

use crate::engine::Record;
use crate::model::{Name, Time};

use super::codec::{self, DecodeError, Framed, Head, LONGEST, to_payload};
use super::recover::Recovered;
use super::shelf::{MOST_OPS, Op, Shelf, ShelfError};
use super::{keys, pack};

/// Keeps records.
pub trait Store: Send {
    /// Keeps a batch; it is on the disk when this returns. Blocks.
    ///
    /// # Errors
    /// Nothing may be acknowledged then; the same batch can be committed again.
    fn commit(&mut self, batch: &Batch) -> Result<(), CommitError>;

    /// Drops some of what is older than it need be kept; call it now and then. Blocks.
    ///
    /// # Errors
    /// When the database does not answer; nothing is lost by that.
    fn retain(&mut self, now: Time) -> Result<Retained, RetainError>;
}

/// What is kept together.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Batch {
    /// The records.
    pub records: Vec<Record>,
    /// Packet id and payload hash of the messages that are durable with this commit and not yet
    /// acknowledged; takes the place of the list before.
    pub unacknowledged: Vec<(u16, u64)>,
}

/// Why a batch was not kept.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum CommitError {
    /// A record cannot be written as bytes.
    #[error("a record cannot be written: {0}")]
    Encode(String),
    /// The database could not be opened again after an error.
    #[error("the store's files cannot be opened again: {0}")]
    Mend(String),
    /// The database refused the batch.
    #[error("the store cannot be written: {0}")]
    Write(String),
    /// The disk did not confirm.
    #[error("the disk did not confirm what was written: {0}")]
    Sync(String),
}

/// Why nothing was dropped.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("old records cannot be dropped: {0}")]
pub struct RetainError(pub(super) String);

/// What [`Store::retain`] did.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Retained {
    /// So many records were dropped and nothing is left to drop now.
    Done(usize),
    /// So many were dropped and there are more; call again soon.
    More(usize),
}

/// Whether the database may be used as it is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Health {
    Well,
    /// An operation failed; it is to be mended before the next.
    Broken,
}

/// A store on some shelf.
#[derive(Debug)]
pub struct Journal<S> {
    pub(super) shelf: Arc<S>,
    pub(super) banks: Arc<[Name]>,
    pub(super) keep_days: u32,
    serial: u64,
    commits: u64,
    unacknowledged: Vec<(u16, u64)>,
    health: Health,
}

/// How many messages are listed in one value.
const LISTED: usize = 400;

impl<S: Shelf> Journal<S> {
    /// A store that goes on from what was recovered.
    pub(super) fn new(
        shelf: Arc<S>,
        banks: Arc<[Name]>,
        keep_days: u32,
        recovered: &Recovered,
    ) -> Self {
        Self {
            shelf,
            banks,
            keep_days,
            serial: recovered.scanned.serial,
            commits: recovered.scanned.commits,
            unacknowledged: recovered.unacknowledged.clone(),
            health: Health::Well,
        }
    }

    fn try_commit(&mut self, batch: &Batch) -> Result<(), CommitError> {
        if self.health == Health::Broken {
            self.shelf
                .mend()
                .map_err(|e| CommitError::Mend(e.to_string()))?;
            self.health = Health::Well;
        }
        for ops in self.batches_of(batch)? {
            let wrong = |e: ShelfError| CommitError::Write(e.to_string());
            self.shelf.apply(ops).map_err(wrong)?;
        }
        let synced = self.shelf.sync();
        let noted = synced.and_then(|()| self.shelf.note(self.commits + 1));
        noted.map_err(|e| CommitError::Sync(e.to_string()))
    }

    fn batches_of(&mut self, batch: &Batch) -> Result<Vec<Vec<Op>>, CommitError> {
        let mut ops = Vec::new();
        let mut last = Vec::new();
        for record in &batch.records {
            let into = match record {
                Record::Turn(_) => &mut last,
                _ => &mut ops,
            };
            self.record(into, record)?;
        }
        self.list(&mut last, &batch.unacknowledged)?;
        let count = to_payload(&(self.commits + 1)).map_err(encode)?;
        self.put(&mut last, keys::commits(), &count);
        let mut batches: Vec<Vec<Op>> = ops.chunks(MOST_OPS).map(<[Op]>::to_vec).collect();
        // The turn and the list stay in one batch where a batch can hold them.
        match batches.last_mut() {
            Some(batch) if batch.len() + last.len() <= MOST_OPS => batch.append(&mut last),
            _ => batches.extend(last.chunks(MOST_OPS).map(<[Op]>::to_vec)),
        }
        Ok(batches)
    }

    fn record(&mut self, ops: &mut Vec<Op>, record: &Record) -> Result<(), CommitError> {
        match record {
            Record::Turn(turn) => {
                let payload = pack::pack(turn, &self.banks).map_err(encode)?;
                self.put(ops, keys::turn(turn.number), &payload);
            }
            Record::Checkpoint { bank, turn, state } => {
                let payload = to_payload(&(turn, state)).map_err(encode)?;
                self.replace(ops, keys::checkpoint(bank), &payload)?;
            }
            Record::Digest(bank, digest) => {
                let key = keys::digest(bank, digest.at, digest.span);
                self.put(ops, key, &to_payload(digest).map_err(encode)?);
            }
            Record::Line { bank, turn, event } => {
                let key = keys::line_event(bank, event.at, *turn);
                self.put(ops, key, &to_payload(event).map_err(encode)?);
            }
            Record::Look(look) => {
                let key = keys::look(&look.bank, look.span, look.at);
                self.replace(ops, key, &to_payload(look).map_err(encode)?)?;
            }
            Record::Notice(notice) => {
                let payload = to_payload(notice).map_err(encode)?;
                self.replace(ops, keys::notice(&notice.id), &payload)?;
                self.put(ops, keys::raised(notice.raised, &notice.id), &[]);
            }
            Record::Evidence { notice, evidence } => {
                let payload = to_payload(evidence).map_err(encode)?;
                self.replace(ops, keys::evidence(notice), &payload)?;
            }
            Record::Delivery(delivery) => {
                let payload = to_payload(delivery).map_err(encode)?;
                self.replace(ops, keys::delivery(delivery.number), &payload)?;
            }
            Record::Delivered { number } => {
                let key = keys::delivery(*number);
                let parts = self.parts_under(&key)?;
                ops.push(Op::Remove(key));
                ops.extend(parts);
            }
        }
        Ok(())
    }

    /// Puts a payload under a key that holds nothing, or something short.
    fn put(&mut self, ops: &mut Vec<Op>, key: Vec<u8>, payload: &[u8]) {
        if payload.len() <= LONGEST {
            let value = codec::whole(&key, payload);
            ops.push(Op::Put(key, value));
            return;
        }
        self.serial += 1;
        let serial = self.serial;
        let mut parts = 0;
        for piece in payload.chunks(LONGEST) {
            let part = keys::part(serial, parts);
            let value = codec::part(&part, piece);
            ops.push(Op::Put(part, value));
            parts += 1;
        }
        let value = codec::head(&key, Head { serial, parts });
        ops.push(Op::Put(key, value));
    }

    /// Puts a payload in place of what the key holds.
    fn replace(
        &mut self,
        ops: &mut Vec<Op>,
        key: Vec<u8>,
        payload: &[u8],
    ) -> Result<(), CommitError> {
        let old = self.parts_under(&key)?;
        self.put(ops, key, payload);
        ops.extend(old);
        Ok(())
    }

    fn parts_under(&self, key: &[u8]) -> Result<Vec<Op>, CommitError> {
        let value = self
            .shelf
            .get(key)
            .map_err(|e| CommitError::Write(e.to_string()))?;
        Ok(value.map_or_else(Vec::new, |value| parts_of(key, &value)))
    }

    fn list(&self, ops: &mut Vec<Op>, messages: &[(u16, u64)]) -> Result<(), CommitError> {
        if messages == self.unacknowledged {
            return Ok(());
        }
        let mut pieces = 0;
        for some in messages.chunks(LISTED) {
            let key = keys::unacknowledged(pieces);
            let value = codec::whole(&key, &to_payload(&some).map_err(encode)?);
            ops.push(Op::Put(key, value));
            pieces += 1;
        }
        let before = u32::try_from(self.unacknowledged.len().div_ceil(LISTED)).unwrap_or(u32::MAX);
        ops.extend((pieces..before).map(|p| Op::Remove(keys::unacknowledged(p))));
        Ok(())
    }
}

fn encode(e: DecodeError) -> CommitError {
    CommitError::Encode(e.to_string())
}

/// What takes away the parts that this value names.
pub(super) fn parts_of(key: &[u8], value: &[u8]) -> Vec<Op> {
    match codec::unframe(key, value) {
        Ok(Framed::Head(head)) => (0..head.parts)
            .map(|p| Op::Remove(keys::part(head.serial, p)))
            .collect(),
        _ => Vec::new(),
    }
}

impl<S: Shelf> Store for Journal<S> {
    fn commit(&mut self, batch: &Batch) -> Result<(), CommitError> {
        if batch.records.is_empty() && batch.unacknowledged == self.unacknowledged {
            return Ok(());
        }
        let done = self.try_commit(batch);
        match &done {
            Ok(()) => {
                self.commits += 1;
                self.unacknowledged.clone_from(&batch.unacknowledged);
            }
            // What cannot be written as bytes never reached the database.
            Err(CommitError::Encode(_)) => {}
            Err(_) => self.health = Health::Broken,
        }
        done
    }

    fn retain(&mut self, now: Time) -> Result<Retained, RetainError> {
        if self.health == Health::Broken {
            return Err(RetainError("the last commit failed".to_owned()));
        }
        let done = super::retention::retain(&*self.shelf, &self.banks, self.keep_days, now);
        if done.is_err() {
            self.health = Health::Broken;
        }
        done.map_err(|e| RetainError(e.to_string()))
    }
}
