//! A bank's windows: judges each arriving value and puts it in its place.

use serde::{Deserialize, Serialize};

use crate::model::{Bank, Pairing, Reason, SourceIx, Time, Value};

use super::numbers::Numbers;
use super::{Blocks, Entry, Ring};

/// No counter of a plant goes beyond this (2^53, what a double holds exactly), and sums of a few such
/// numbers still fit.
const MOST_CYCLE: u64 = 1 << 53;

/// A value as it arrives at its window.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Arriving {
    /// The source.
    pub source: SourceIx,
    /// The value.
    pub value: Value,
    /// When it was taken (or received, where the payload says nothing).
    pub taken: Time,
    /// Whether the payload said when it was taken.
    pub time_given: bool,
    /// The cycle as the payload counts.
    pub cycle: Option<i64>,
}

/// How a value was taken in.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Accepted {
    /// In its turn.
    InTurn,
    /// After its cycle or slot had closed: in the ring, for looks; not for the watch.
    Late,
}

/// The windows of a bank.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Windows {
    pairing: Pairing,
    capacity: usize,
    wait: u32,
    origin: Option<Value>,
    rings: Vec<Ring>,
    blocks: Option<Blocks>,
    count: CycleCount,
    /// Per source, what tells doubles and restarts of a counter apart.
    numbers: Vec<Numbers>,
}

/// The plant's cycle counter made to rise for ever, although counters start again.
#[derive(Clone, Copy, Debug, Default, PartialEq, Serialize, Deserialize)]
struct CycleCount {
    /// Added to the payload's number.
    shift: i64,
    /// Before this time another shift held.
    since: Option<Time>,
    shift_before: i64,
}

impl CycleCount {
    /// The counter has started again with this value, which follows the newest.
    fn restart(&mut self, arriving: &Arriving, newest: i64) -> i64 {
        let next = newest.saturating_add(1);
        self.shift_before = self.shift;
        self.shift = next.saturating_sub(arriving.cycle.unwrap_or(0));
        self.since = Some(arriving.taken);
        next
    }
}

impl Windows {
    /// Empty windows of a bank.
    pub fn new(bank: &Bank) -> Self {
        Self {
            pairing: bank.pairing,
            capacity: bank.window_length(),
            wait: bank.wait_cycles,
            origin: bank.characteristic.target,
            rings: Vec::new(),
            blocks: match bank.pairing {
                Pairing::Cycle => Some(Blocks::cycles(bank.wait_cycles)),
                Pairing::Slot { .. } => Some(Blocks::slots()),
                Pairing::None => None,
            },
            count: CycleCount::default(),
            numbers: Vec::new(),
        }
    }

    /// Windows as they once stood, to be looked at again: `rings` by [`SourceIx`], everything up to
    /// `closed_to` closed. They take nothing in.
    pub fn recalled(bank: &Bank, origin: Value, rings: Vec<Ring>, closed_to: i64) -> Self {
        Self {
            origin: Some(origin),
            rings,
            blocks: Blocks::closed_until(bank.pairing, closed_to),
            ..Self::new(bank)
        }
    }

    /// Whether these windows can go on under a setup (same pairing); adapts their length.
    pub fn adapt(&mut self, bank: &Bank) -> bool {
        if self.pairing != bank.pairing {
            return false;
        }
        self.capacity = bank.window_length();
        self.wait = bank.wait_cycles;
        for ring in &mut self.rings {
            ring.resize(self.capacity);
        }
        if let Some(blocks) = &mut self.blocks {
            blocks.set_wait(self.wait);
        }
        true
    }

    /// Makes room for one more source, with the next [`SourceIx`].
    pub fn add_source(&mut self) {
        self.rings.push(Ring::new(self.capacity));
        self.numbers.push(Numbers::default());
        if let Some(blocks) = &mut self.blocks {
            blocks.add_source();
        }
    }

    /// Whether cycles and slots wait for a source.
    pub fn expect(&mut self, source: SourceIx, yes: bool) {
        if let Some(blocks) = &mut self.blocks {
            blocks.expect(source.index(), yes);
        }
    }

    /// Whether all sources are known, so that a cycle can be complete.
    pub fn settle(&mut self, settled: bool) {
        if let Some(blocks) = &mut self.blocks {
            blocks.settle(settled);
        }
    }

    /// Judges a value and puts it in its place.
    ///
    /// # Errors
    /// [`Reason::Double`] and [`Reason::NoCycle`].
    pub fn accept(&mut self, arriving: &Arriving) -> Result<Accepted, Reason> {
        let mut place = self.place(arriving)?;
        let s = arriving.source.index();
        let origin = *self.origin.get_or_insert(arriving.value);
        let offset = arriving.value.minus(origin);
        if self.is_double(arriving, place) {
            if !self.contradicts(arriving, place, offset) {
                return Err(Reason::Double);
            }
            place = self.count.restart(arriving, self.newest_place());
        }
        self.numbers[s].remember(arriving);
        let entry = Entry {
            place,
            taken: arriving.taken,
            offset,
        };
        let ring = &mut self.rings[s];
        let late_alone = ring.newest().is_some_and(|n| n.place > place);
        // A slot holds one value of a source, the newest; a cycle has only one.
        if !(matches!(self.pairing, Pairing::Slot { .. }) && ring.supersede(entry)) {
            ring.insert(entry);
        }
        let in_turn = match &mut self.blocks {
            Some(blocks) => blocks.deliver(s, place),
            None => !late_alone,
        };
        Ok(if in_turn {
            Accepted::InTurn
        } else {
            Accepted::Late
        })
    }

    fn place(&mut self, arriving: &Arriving) -> Result<i64, Reason> {
        match self.pairing {
            Pairing::None => Ok(arriving.taken.us()),
            Pairing::Slot { length_us } => Ok(arriving.taken.us().div_euclid(length_us.max(1))),
            Pairing::Cycle => {
                let cycle = arriving.cycle.ok_or(Reason::NoCycle)?;
                if cycle.unsigned_abs() > MOST_CYCLE {
                    return Err(Reason::BadCycle);
                }
                Ok(self.count_on(arriving, cycle))
            }
        }
    }

    /// The cycle's number in a count that never falls. A counter has started again when a number
    /// comes from well below its source's newest although the value was taken later (or, where the
    /// payload carries no time, from further back than the window reaches).
    fn count_on(&mut self, arriving: &Arriving, cycle: i64) -> i64 {
        let count = &mut self.count;
        if count
            .since
            .is_some_and(|since| arriving.time_given && arriving.taken < since)
        {
            return cycle.saturating_add(count.shift_before);
        }
        let place = cycle.saturating_add(count.shift);
        let Some(newest) = self.rings[arriving.source.index()].newest() else {
            return place;
        };
        let back = newest.place.saturating_sub(place);
        let restarted = if arriving.time_given {
            back > i64::from(self.wait) && arriving.taken > newest.taken
        } else {
            back > self.capacity as i64
        };
        if !restarted {
            return place;
        }
        let newest = self.newest_place();
        self.count.restart(arriving, newest)
    }

    fn newest_place(&self) -> i64 {
        let held = self.rings.iter().filter_map(|r| r.newest());
        let of_blocks = self.blocks.as_ref().and_then(Blocks::newest);
        let newest = held.map(|e| e.place).chain(of_blocks).max();
        newest.unwrap_or(0)
    }

    fn is_double(&self, arriving: &Arriving, place: i64) -> bool {
        let s = arriving.source.index();
        let ring = &self.rings[s];
        let taken = Some(arriving.taken);
        match self.pairing {
            // One source has one value in a cycle, whatever time a second one claims.
            Pairing::Cycle => ring.holds(place, None),
            // Times in whole seconds repeat; where the payload counts, the number tells.
            Pairing::Slot { .. } | Pairing::None => {
                arriving.time_given
                    && ring.holds(place, taken)
                    && !self.numbers[s].is_another(arriving)
            }
        }
    }

    /// Whether a number that is held already comes with another value once more than a redelivery
    /// could explain: the counter has started again inside the window, and no time says so.
    fn contradicts(&mut self, arriving: &Arriving, place: i64, offset: f64) -> bool {
        if self.pairing != Pairing::Cycle || arriving.time_given {
            return false;
        }
        let s = arriving.source.index();
        let same = self.rings[s].at(place).is_some_and(|e| e.offset == offset);
        self.numbers[s].contradicted(arriving.cycle, same) > self.wait
    }

    /// Offsets are relative to another origin from now on. Those held are moved by the difference, which
    /// may cost their last digit.
    pub fn rebase(&mut self, origin: Value) {
        let shift = self.origin().minus(origin);
        for ring in &mut self.rings {
            ring.shift(shift);
        }
        self.origin = Some(origin);
    }

    /// Values of these sources before now no longer count.
    pub fn start_fresh(&mut self, source: SourceIx, place: i64) {
        if let Some(ring) = self.rings.get_mut(source.index()) {
            ring.start_fresh(place);
        }
    }

    /// The cycles (or slots) that have closed with enough sources since they were last asked for,
    /// oldest first.
    pub fn take_closed(&mut self) -> Vec<i64> {
        let blocks = self.blocks.as_mut();
        blocks.map(Blocks::take_closed).unwrap_or_default()
    }

    /// The values of one cycle as offsets from the origin, by [`SourceIx`], NaN where a source has
    /// none that counts; returns when the first of them was taken.
    pub fn cycle(&self, place: i64, values: &mut Vec<f64>) -> Option<Time> {
        values.clear();
        let mut first = None;
        for ring in &self.rings {
            let entry = ring.at(place);
            values.push(entry.map_or(f64::NAN, |e| e.offset));
            first = first.into_iter().chain(entry.map(|e| e.taken)).min();
        }
        first
    }

    /// One source's ring.
    pub fn ring(&self, source: SourceIx) -> &Ring {
        &self.rings[source.index()]
    }

    /// Every ring, by [`SourceIx`].
    pub fn rings(&self) -> &[Ring] {
        &self.rings
    }

    /// How values belong together.
    pub fn pairing(&self) -> Pairing {
        self.pairing
    }

    /// What every offset is relative to; zero before the first value.
    pub fn origin(&self) -> Value {
        const ZERO: Value = Value::Decimal {
            coefficient: 0,
            exponent: 0,
        };
        self.origin.unwrap_or(ZERO)
    }

    /// The ledger of cycles or slots, where the bank pairs.
    pub fn blocks(&self) -> Option<&Blocks> {
        self.blocks.as_ref()
    }
}
