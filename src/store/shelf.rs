//! The one small interface behind which the embedded database is kept: ordered keys, bytes as values.
//!
//! Everything above it (records, keys, recovery, retention, history) is the same for sled and for
//! the twin in memory. Deliberately absent: transactions, trees, iterators that borrow.

/// Most operations of one [`Shelf::apply`]: larger batches make sled's memory and files grow out of
/// proportion (measured: 16 times the files at 2 000 operations).
pub(super) const MOST_OPS: usize = 200;

/// One change.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Op {
    /// Puts a value under a key, in place of what was there.
    Put(Vec<u8>, Vec<u8>),
    /// Takes a key away; nothing happens when it is not there.
    Remove(Vec<u8>),
}

/// Why the database did not do what was asked.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("{0}")]
pub struct ShelfError(pub String);

/// A key with its value.
pub type Entry = (Vec<u8>, Vec<u8>);

/// From which end a page is read.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Order {
    /// Smallest key first.
    Rising,
    /// Largest key first.
    Falling,
}

/// Ordered keys and their values.
pub trait Shelf: Send + Sync + 'static {
    /// The value under a key.
    fn get(&self, key: &[u8]) -> Result<Option<Vec<u8>>, ShelfError>;

    /// At most `most` entries with `from <= key < to`.
    fn page(
        &self,
        from: &[u8],
        to: &[u8],
        order: Order,
        most: usize,
    ) -> Result<Vec<Entry>, ShelfError>;

    /// Applies at most [`MOST_OPS`] changes, all or none of them.
    fn apply(&self, ops: Vec<Op>) -> Result<(), ShelfError>;

    /// Returns when everything applied so far is on the disk.
    fn sync(&self) -> Result<(), ShelfError>;

    /// Notes outside the database how many commits it holds. Called after [`Shelf::sync`]; need not
    /// outlive a power cut, so it may be behind but never ahead.
    fn note(&self, commits: u64) -> Result<(), ShelfError>;

    /// The last such note that can be read.
    fn noted(&self) -> Option<u64>;

    /// Makes the database usable again after an error, without what was not synced.
    fn mend(&self) -> Result<(), ShelfError>;
}
