//! One source's newest values, in order.

use std::collections::VecDeque;

use serde::{Deserialize, Serialize};

use crate::model::Time;

/// One value in a window: 24 bytes.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Entry {
    /// Place in the order: the cycle or slot where the bank pairs, else microseconds of `taken`.
    pub place: i64,
    /// When it was taken.
    pub taken: Time,
    /// The value less the bank's origin, in the unit.
    pub offset: f64,
}

/// The newest values of a source, oldest first, at most `capacity`.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Ring {
    entries: VecDeque<Entry>,
    capacity: usize,
    /// Values before this place no longer count (an adjustment, an incident that is over).
    fresh_from: i64,
}

impl Ring {
    /// An empty ring for `capacity` values.
    pub fn new(capacity: usize) -> Self {
        Self {
            entries: VecDeque::new(),
            capacity: capacity.max(1),
            fresh_from: i64::MIN,
        }
    }

    /// A ring that holds these entries (in order), of which those before `fresh_from` do not count.
    pub fn recalled(entries: Vec<Entry>, fresh_from: i64) -> Self {
        Self {
            capacity: entries.len().max(1),
            entries: entries.into(),
            fresh_from,
        }
    }

    /// The place before which values do not count.
    pub fn fresh_from(&self) -> i64 {
        self.fresh_from
    }

    /// Puts a value in its place; the oldest leaves when the ring is full. A value older than
    /// everything in a full ring is dropped.
    pub fn insert(&mut self, entry: Entry) {
        let at = self.position_after(entry.place);
        if self.entries.len() == self.capacity {
            if at == 0 {
                return;
            }
            self.entries.pop_front();
            self.entries.insert(at - 1, entry);
        } else {
            self.entries.insert(at, entry);
        }
    }

    /// Replaces the value at the same place when the new one was taken later; says whether there
    /// was one at that place.
    pub fn supersede(&mut self, entry: Entry) -> bool {
        let after = self.position_after(entry.place);
        let Some(there) = after.checked_sub(1).and_then(|i| self.entries.get_mut(i)) else {
            return false;
        };
        if there.place != entry.place {
            return false;
        }
        if entry.taken > there.taken {
            *there = entry;
        }
        true
    }

    /// Whether some value at `place` was taken at `taken` (`None` asks for the place alone).
    pub fn holds(&self, place: i64, taken: Option<Time>) -> bool {
        let after = self.position_after(place);
        let same_place = self
            .entries
            .range(..after)
            .rev()
            .take_while(|e| e.place == place);
        same_place
            .into_iter()
            .any(|e| taken.is_none_or(|t| e.taken == t))
    }

    /// The index behind the last entry at or before `place`; new values mostly go to the end.
    fn position_after(&self, place: i64) -> usize {
        match self.entries.back() {
            Some(last) if last.place > place => self.entries.partition_point(|e| e.place <= place),
            _ => self.entries.len(),
        }
    }

    /// Moves every offset.
    pub fn shift(&mut self, by: f64) {
        for entry in &mut self.entries {
            entry.offset += by;
        }
    }

    /// Values before `place` no longer count.
    pub fn start_fresh(&mut self, place: i64) {
        self.fresh_from = self.fresh_from.max(place);
    }

    /// The values that count, oldest first.
    pub fn fresh(&self) -> impl DoubleEndedIterator<Item = &Entry> + Clone {
        let from = self.entries.partition_point(|e| e.place < self.fresh_from);
        self.entries.range(from..)
    }

    /// All values held, oldest first.
    pub fn iter(&self) -> impl DoubleEndedIterator<Item = &Entry> {
        self.entries.iter()
    }

    /// The value at `place`, if it counts. Made for places near the newest.
    pub fn at(&self, place: i64) -> Option<&Entry> {
        let mut from_newest = self.entries.iter().rev();
        from_newest
            .find(|e| e.place <= place)
            .filter(|e| e.place == place && place >= self.fresh_from)
    }

    /// The newest value.
    pub fn newest(&self) -> Option<&Entry> {
        self.entries.back()
    }

    /// How many values it holds.
    pub fn len(&self) -> usize {
        self.entries.len()
    }

    /// Whether it holds none.
    pub fn is_empty(&self) -> bool {
        self.entries.is_empty()
    }

    /// Holds at most `capacity` from now on; the oldest leave.
    pub fn resize(&mut self, capacity: usize) {
        self.capacity = capacity.max(1);
        let surplus = self.entries.len().saturating_sub(self.capacity);
        self.entries.drain(..surplus);
    }
}
