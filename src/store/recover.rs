//! The start: every record's checksum is checked, and what goes on from here is read.
//!
//! A checkpoint holds a bank up to its turn; turns after the oldest checkpoint are read as a stream,
//! because a day of turns need not fit in memory. A bank that has no checkpoint yet is noted together
//! with the last turn at that moment, so that it does not ask for the journal of all the others.

use std::collections::{BTreeMap, VecDeque};
use std::sync::Arc;

use crate::engine::Turn;
use crate::model::Name;
use crate::notice::Delivery;

use super::codec::{self, DecodeError, Framed, Head, from_payload, to_payload};
use super::keys::{self, Sort};
use super::pack;
use super::shelf::{Entry, MOST_OPS, Op, Order, Shelf, ShelfError};

/// Entries read at once: at most about 6 KiB each.
const PAGE: usize = 256;

/// Version of the layout of keys and records.
const FORMAT: u32 = 1;

/// Why the store's content could not be read.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum ReadError {
    /// The database does not answer.
    #[error("the store could not be read: {0}")]
    Shelf(String),
    /// A record is damaged.
    #[error("a record of the store ({key}) is damaged: {why}")]
    Record {
        /// Its key, printable.
        key: String,
        /// What is wrong with it.
        why: String,
    },
    /// The end is missing: the database says less than was once confirmed.
    #[error("its last {missing} commits are gone although they were confirmed")]
    Behind {
        /// How many.
        missing: u64,
    },
    /// A later version of the program wrote the store.
    #[error(
        "the store was written by a later version of evenrow (form {found}, this one reads {FORMAT}); \
         start that version, or give another store.folder"
    )]
    Newer {
        /// The form found.
        found: u32,
    },
}

impl ReadError {
    /// A record that is not what it should be.
    pub(super) fn record(key: &[u8], why: &DecodeError) -> Self {
        Self::Record {
            key: key.escape_ascii().to_string(),
            why: why.to_string(),
        }
    }
}

impl From<ShelfError> for ReadError {
    fn from(e: ShelfError) -> Self {
        Self::Shelf(e.0)
    }
}

/// What the daemon goes on from.
pub struct Recovered {
    /// The newest checkpoint of each bank: name, last turn contained, state.
    pub checkpoints: Vec<(Name, u64, Vec<u8>)>,
    /// The turns after the oldest of these checkpoints.
    pub turns: Turns,
    /// The number of the last turn kept.
    pub last_turn: u64,
    /// Deliveries not yet confirmed, oldest first.
    pub outbox: Vec<Delivery>,
    /// Messages that were durable and, as far as is known, not acknowledged.
    pub unacknowledged: Vec<(u16, u64)>,
    /// What was checked.
    pub scanned: Scanned,
}

/// What the scan at the start went through.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Scanned {
    /// Values whose checksum is right.
    pub records: u64,
    /// Their bytes.
    pub bytes: u64,
    /// Parts that belonged to no record and were taken away.
    pub orphans: u64,
    /// The highest serial of parts.
    pub(super) serial: u64,
    /// How many commits there have been.
    pub(super) commits: u64,
}

/// Calls `each` for every entry of a range, page by page, smallest key first.
pub(super) fn walk<E: From<ShelfError>>(
    shelf: &dyn Shelf,
    from: &[u8],
    to: &[u8],
    mut each: impl FnMut(&[u8], &[u8]) -> Result<(), E>,
) -> Result<(), E> {
    let mut from = from.to_vec();
    loop {
        let page = shelf.page(&from, to, Order::Rising, PAGE)?;
        for (key, value) in &page {
            each(key, value)?;
        }
        match page.last() {
            Some((key, _)) if page.len() == PAGE => from = [key, &[0][..]].concat(),
            _ => return Ok(()),
        }
    }
}

/// The payload under a key, put together from its parts.
pub(super) fn payload(shelf: &dyn Shelf, key: &[u8], value: &[u8]) -> Result<Vec<u8>, ReadError> {
    let wrong = |e| ReadError::record(key, &e);
    match codec::unframe(key, value).map_err(wrong)? {
        Framed::Whole(payload) => Ok(payload.to_vec()),
        Framed::Part(_) => Err(wrong(DecodeError::Form(2))),
        Framed::Head(head) => {
            let mut all = Vec::new();
            for part in 0..head.parts {
                let part = keys::part(head.serial, part);
                let value = shelf.get(&part)?;
                let value = value.ok_or_else(|| wrong(DecodeError::PartMissing))?;
                match codec::unframe(&part, &value).map_err(|e| ReadError::record(&part, &e))? {
                    Framed::Part(piece) => all.extend_from_slice(piece),
                    _ => return Err(wrong(DecodeError::PartMissing)),
                }
            }
            Ok(all)
        }
    }
}

/// Checks the form, every checksum and that no commit is missing, and takes away parts that no record names.
///
/// # Errors
/// Says which record is damaged.
pub(super) fn scan(shelf: &dyn Shelf) -> Result<Scanned, ReadError> {
    check_form(shelf)?;
    let mut found = Scanned::default();
    let mut heads: BTreeMap<u64, (Head, Vec<u8>, u32)> = BTreeMap::new();
    let mut orphans = Vec::new();
    let (from, to) = keys::EVERYTHING;
    // Parts have the last keys of all, so every head is known when they come.
    walk(shelf, from, to, |key, value| {
        let frame = codec::unframe(key, value).map_err(|e| ReadError::record(key, &e))?;
        found.records += 1;
        found.bytes += (key.len() + value.len()) as u64;
        match frame {
            Framed::Whole(_) => {}
            Framed::Head(head) => {
                heads.insert(head.serial, (head, key.to_vec(), 0));
            }
            Framed::Part(_) => {
                let serial = keys::number_of(key).unwrap_or_default();
                found.serial = found.serial.max(serial);
                match heads.get_mut(&serial) {
                    Some((_, _, seen)) => *seen += 1,
                    None => orphans.push(Op::Remove(key.to_vec())),
                }
            }
        }
        Ok::<(), ReadError>(())
    })?;
    if let Some((_, key, _)) = heads.values().find(|(head, _, seen)| head.parts != *seen) {
        return Err(ReadError::record(key, &DecodeError::PartMissing));
    }
    found.commits = number_under(shelf, &keys::commits())?.unwrap_or_default();
    if let Some(missing @ 1..) = shelf.noted().map(|n| n.saturating_sub(found.commits)) {
        return Err(ReadError::Behind { missing });
    }
    found.orphans = orphans.len() as u64;
    for some in orphans.chunks(MOST_OPS) {
        shelf.apply(some.to_vec())?;
    }
    Ok(found)
}

/// Writes the form into a new database, refuses one of a later form.
fn check_form(shelf: &dyn Shelf) -> Result<(), ReadError> {
    let key = keys::format();
    let wrong = |e| ReadError::record(&key, &e);
    if let Some(value) = shelf.get(&key)? {
        let found: u32 = from_payload(&payload(shelf, &key, &value)?).map_err(wrong)?;
        return match found {
            FORMAT => Ok(()),
            found => Err(ReadError::Newer { found }),
        };
    }
    let value = codec::whole(&key, &to_payload(&FORMAT).map_err(wrong)?);
    shelf.apply(vec![Op::Put(key.clone(), value)])?;
    Ok(shelf.sync()?)
}

/// Reads what the daemon goes on from.
///
/// # Errors
/// When a record cannot be read.
pub(super) fn recover(
    shelf: &Arc<dyn Shelf>,
    banks: &Arc<[Name]>,
    scanned: Scanned,
) -> Result<Recovered, ReadError> {
    let mut checkpoints = Vec::new();
    for (key, value) in range(&**shelf, Sort::Checkpoint)? {
        let bytes = payload(&**shelf, &key, &value)?;
        let (turn, state): (u64, Vec<u8>) =
            from_payload(&bytes).map_err(|e| ReadError::record(&key, &e))?;
        let bank: Name = keys::bank_of(&key).unwrap_or_default().into();
        checkpoints.push((bank, turn, state));
    }
    let last_turn = last_turn(&**shelf, &checkpoints)?;
    join(&**shelf, banks, last_turn)?;
    let first = held(&**shelf, banks)?.map_or(0, |turn| turn.saturating_add(1));
    Ok(Recovered {
        checkpoints,
        turns: Turns::new(Arc::clone(shelf), Arc::clone(banks), first),
        last_turn,
        outbox: outbox(&**shelf)?,
        unacknowledged: unacknowledged(&**shelf)?,
        scanned,
    })
}

fn range(shelf: &dyn Shelf, sort: Sort) -> Result<Vec<Entry>, ReadError> {
    let mut all = Vec::new();
    walk(shelf, &sort.from(), &sort.to(), |key, value| {
        all.push((key.to_vec(), value.to_vec()));
        Ok::<(), ReadError>(())
    })?;
    Ok(all)
}

fn last_turn(shelf: &dyn Shelf, checkpoints: &[(Name, u64, Vec<u8>)]) -> Result<u64, ReadError> {
    let newest = shelf.page(&Sort::Turn.from(), &Sort::Turn.to(), Order::Falling, 1)?;
    let newest = newest.first().and_then(|(key, _)| keys::number_of(key));
    let contained = checkpoints.iter().map(|(_, turn, _)| *turn).max();
    Ok(newest.max(contained).unwrap_or_default())
}

/// Notes for every bank without a checkpoint that it has no turn up to here.
fn join(shelf: &dyn Shelf, banks: &[Name], last_turn: u64) -> Result<(), ReadError> {
    let mut ops = Vec::new();
    for bank in banks {
        let key = keys::joined(bank);
        if shelf.get(&key)?.is_none() && shelf.get(&keys::checkpoint(bank))?.is_none() {
            let turn = to_payload(&last_turn).map_err(|e| ReadError::record(&key, &e))?;
            let value = codec::whole(&key, &turn);
            ops.push(Op::Put(key, value));
        }
    }
    for some in ops.chunks(MOST_OPS) {
        shelf.apply(some.to_vec())?;
    }
    Ok(shelf.sync()?)
}

/// The last turn that every configured bank holds; `None` when there is none. Turns after it are
/// needed; a checkpoint of a bank that is not configured holds nothing back.
pub(super) fn held(shelf: &dyn Shelf, banks: &[Name]) -> Result<Option<u64>, ReadError> {
    let mut least = None::<u64>;
    for bank in banks {
        let turn = match turn_of_checkpoint(shelf, bank)? {
            Some(turn) => turn,
            None => number_under(shelf, &keys::joined(bank))?.unwrap_or_default(),
        };
        least = Some(least.map_or(turn, |l| l.min(turn)));
    }
    Ok(least)
}

fn turn_of_checkpoint(shelf: &dyn Shelf, bank: &str) -> Result<Option<u64>, ReadError> {
    let key = keys::checkpoint(bank);
    let Some(value) = shelf.get(&key)? else {
        return Ok(None);
    };
    // Only the front is needed, and it lies in the first part.
    let front = match codec::unframe(&key, &value) {
        Ok(Framed::Head(head)) => {
            let first = keys::part(head.serial, 0);
            let piece = shelf.get(&first)?.unwrap_or_default();
            match codec::unframe(&first, &piece) {
                Ok(Framed::Part(piece)) => piece.to_vec(),
                _ => return Err(ReadError::record(&key, &DecodeError::PartMissing)),
            }
        }
        _ => payload(shelf, &key, &value)?,
    };
    let front: Result<(u64, _), _> = postcard::take_from_bytes(&front);
    let (turn, _) =
        front.map_err(|e| ReadError::record(&key, &DecodeError::Content(e.to_string())))?;
    Ok(Some(turn))
}

/// The number kept under a key.
fn number_under(shelf: &dyn Shelf, key: &[u8]) -> Result<Option<u64>, ReadError> {
    let Some(value) = shelf.get(key)? else {
        return Ok(None);
    };
    let bytes = payload(shelf, key, &value)?;
    from_payload(&bytes)
        .map(Some)
        .map_err(|e| ReadError::record(key, &e))
}

fn outbox(shelf: &dyn Shelf) -> Result<Vec<Delivery>, ReadError> {
    let mut all = Vec::new();
    for (key, value) in range(shelf, Sort::Delivery)? {
        let bytes = payload(shelf, &key, &value)?;
        all.push(from_payload(&bytes).map_err(|e| ReadError::record(&key, &e))?);
    }
    Ok(all)
}

fn unacknowledged(shelf: &dyn Shelf) -> Result<Vec<(u16, u64)>, ReadError> {
    let (from, to) = keys::unacknowledged_range();
    let mut all = Vec::new();
    walk(shelf, &from, &to, |key, value| {
        let bytes = payload(shelf, key, value)?;
        let some: Vec<(u16, u64)> = from_payload(&bytes).map_err(|e| ReadError::record(key, &e))?;
        all.extend(some);
        Ok::<(), ReadError>(())
    })?;
    Ok(all)
}

/// Turns of the journal in their order, read page by page.
pub struct Turns {
    shelf: Arc<dyn Shelf>,
    banks: Arc<[Name]>,
    page: VecDeque<Entry>,
    from: Option<Vec<u8>>,
}

impl Turns {
    pub(super) fn new(shelf: Arc<dyn Shelf>, banks: Arc<[Name]>, first: u64) -> Self {
        Self {
            shelf,
            banks,
            page: VecDeque::new(),
            from: Some(keys::turn(first)),
        }
    }

    fn read(&self, key: &[u8], value: &[u8]) -> Result<Turn, ReadError> {
        let bytes = payload(&*self.shelf, key, value)?;
        let number = keys::number_of(key).unwrap_or_default();
        pack::unpack(number, &bytes, &self.banks).map_err(|e| ReadError::record(key, &e))
    }

    fn fill(&mut self) -> Result<(), ReadError> {
        let Some(from) = self.from.take() else {
            return Ok(());
        };
        let page = self
            .shelf
            .page(&from, &Sort::Turn.to(), Order::Rising, PAGE)?;
        if let (PAGE, Some((key, _))) = (page.len(), page.last()) {
            self.from = Some([key, &[0][..]].concat());
        }
        self.page = page.into();
        Ok(())
    }
}

impl Iterator for Turns {
    type Item = Result<Turn, ReadError>;

    /// Ends after the first error.
    fn next(&mut self) -> Option<Self::Item> {
        if self.page.is_empty()
            && let Err(e) = self.fill()
        {
            return Some(Err(e));
        }
        let (key, value) = self.page.pop_front()?;
        let turn = self.read(&key, &value);
        if turn.is_err() {
            self.page.clear();
            self.from = None;
        }
        Some(turn)
    }
}
