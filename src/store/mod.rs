//! The embedded store: journal, checkpoints, looks, notices, outbox, and its in-memory twin.
//!
//! Owns what is on disk. What the engine wants kept comes in as one [`Batch`] per turn and is on the
//! disk when [`Store::commit`] returns; what was kept is read back through [`crate::engine::History`]
//! and, at the start, as [`Recovered`].
//!
//! What must hold:
//! - a commit is durable when it returns, and one that failed can be tried again as it is;
//! - every record carries a version and a checksum that also covers its key;
//! - a damaged database is set aside under another name, never deleted, and said;
//! - sled and its twin share everything above [`shelf::Shelf`], so they cannot disagree on meaning.
//!
//! Deliberately absent: what the records mean to a bank (that is the engine), and any clock: the
//! time is an argument.

mod codec;
mod damage;
mod history;
mod journal;
mod keys;
mod memory;
mod pack;
mod recover;
mod retention;
mod shelf;
mod sled_store;

pub use journal::{Batch, CommitError, RetainError, Retained, Store};
pub use memory::{MemoryStore, Script};
pub use recover::{ReadError, Recovered, Scanned, Turns};
pub use sled_store::{OpenError, Opened, SetAside, SledStore, open};

#[cfg(test)]
mod samples;
#[cfg(test)]
mod tests;
