//! The twin in memory: the same store on an ordered map, with faults that a test scripts.

use std::collections::BTreeMap;
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};

use crate::engine::History;
use crate::model::Name;

use super::history::Past;
use super::journal::Journal;
use super::recover::{ReadError, Recovered, recover, scan};
use super::shelf::{Entry, Op, Order, Shelf, ShelfError};

/// The store in memory.
pub type MemoryStore = Journal<MemoryShelf>;

/// What a disk does wrong, and what it holds; clones share the same disk.
#[derive(Clone, Debug, Default)]
pub struct Script(Arc<Mutex<Disk>>);

#[derive(Debug, Default)]
struct Disk {
    /// As readers see it.
    now: BTreeMap<Vec<u8>, Vec<u8>>,
    /// As a crash leaves it.
    synced: BTreeMap<Vec<u8>, Vec<u8>>,
    noted: Option<u64>,
    syncs: u64,
    fail_sync: Option<u64>,
    unwritable: bool,
    /// An error stays until the database is opened again, as with sled.
    broken: bool,
}

impl Script {
    /// A sound, empty disk.
    pub fn new() -> Self {
        Self::default()
    }

    /// The `nth` sync from now on (the first is 1) fails, once.
    pub fn fail_sync(&self, nth: u64) {
        let mut disk = self.disk();
        disk.fail_sync = Some(disk.syncs.saturating_add(nth));
    }

    /// From now on nothing can be written.
    pub fn make_unwritable(&self) {
        self.disk().unwritable = true;
    }

    /// The disk can be written again.
    pub fn make_writable(&self) {
        self.disk().unwritable = false;
    }

    /// The power goes: what was not synced is gone.
    pub fn crash(&self) {
        let mut disk = self.disk();
        disk.now = disk.synced.clone();
        disk.broken = false;
    }

    /// Opens a store on this disk, as [`super::open`] does on a real one.
    ///
    /// # Errors
    /// When what lies on the disk cannot be read.
    pub fn open(
        &self,
        banks: &[Name],
        keep_days: u32,
    ) -> Result<(MemoryStore, Arc<dyn History>, Recovered), ReadError> {
        let shelf = Arc::new(MemoryShelf(self.clone()));
        let scanned = scan(&*shelf)?;
        let banks: Arc<[Name]> = banks.into();
        let dynamic: Arc<dyn Shelf> = Arc::clone(&shelf) as _;
        let recovered = recover(&dynamic, &banks, scanned)?;
        let store = Journal::new(shelf, banks, keep_days, &recovered);
        Ok((store, Arc::new(Past(dynamic)), recovered))
    }

    fn disk(&self) -> MutexGuard<'_, Disk> {
        self.0.lock().unwrap_or_else(PoisonError::into_inner)
    }
}

/// The ordered map as a shelf.
#[derive(Debug)]
pub struct MemoryShelf(Script);

impl Disk {
    fn usable(&self) -> Result<(), ShelfError> {
        if self.broken {
            return Err(ShelfError("an earlier write failed".to_owned()));
        }
        Ok(())
    }

    fn fail(&mut self, why: &str) -> Result<(), ShelfError> {
        self.broken = true;
        Err(ShelfError(why.to_owned()))
    }
}

impl Shelf for MemoryShelf {
    fn get(&self, key: &[u8]) -> Result<Option<Vec<u8>>, ShelfError> {
        Ok(self.0.disk().now.get(key).cloned())
    }

    fn page(
        &self,
        from: &[u8],
        to: &[u8],
        order: Order,
        most: usize,
    ) -> Result<Vec<Entry>, ShelfError> {
        if from >= to {
            return Ok(Vec::new());
        }
        let disk = self.0.disk();
        let range = disk.now.range(from.to_vec()..to.to_vec());
        let entry = |(k, v): (&Vec<u8>, &Vec<u8>)| (k.clone(), v.clone());
        Ok(match order {
            Order::Rising => range.take(most).map(entry).collect(),
            Order::Falling => range.rev().take(most).map(entry).collect(),
        })
    }

    fn apply(&self, ops: Vec<Op>) -> Result<(), ShelfError> {
        let mut disk = self.0.disk();
        disk.usable()?;
        if disk.unwritable {
            return disk.fail("the disk is full");
        }
        for op in ops {
            match op {
                Op::Put(key, value) => disk.now.insert(key, value),
                Op::Remove(key) => disk.now.remove(&key),
            };
        }
        Ok(())
    }

    fn sync(&self) -> Result<(), ShelfError> {
        let mut disk = self.0.disk();
        disk.usable()?;
        disk.syncs += 1;
        if disk.fail_sync == Some(disk.syncs) {
            disk.fail_sync = None;
            return disk.fail("the disk did not answer");
        }
        disk.synced = disk.now.clone();
        Ok(())
    }

    fn note(&self, commits: u64) -> Result<(), ShelfError> {
        self.0.disk().noted = Some(commits);
        Ok(())
    }

    fn noted(&self) -> Option<u64> {
        self.0.disk().noted
    }

    fn mend(&self) -> Result<(), ShelfError> {
        let mut disk = self.0.disk();
        disk.now = disk.synced.clone();
        disk.broken = false;
        Ok(())
    }
}

#[cfg(test)]
impl Script {
    /// Every turn that is there, whatever the checkpoints hold.
    pub(super) fn all_turns(&self, banks: &[Name]) -> super::recover::Turns {
        let shelf = Arc::new(MemoryShelf(self.clone()));
        super::recover::Turns::new(shelf, banks.into(), 0)
    }
}
