//! Which cycles (or slots) are open, which are complete, and what is late.
//!
//! A cycle closes when every expected source has delivered, or when some source has delivered its
//! `wait`-th newer one; a slot when any value lies one slot past its end. Cycles close in order.

use std::collections::VecDeque;

use serde::{Deserialize, Serialize};

use crate::model::Pairing;

/// The most cycles that may be open at once: sources that count separately would otherwise open new
/// ones for ever. Far above `wait` times what any bank needs.
const MOST_OPEN: usize = 256;

/// The ledger of cycles or slots ("blocks" in the statistics).
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Blocks {
    rule: Rule,
    open: VecDeque<Open>,
    /// Everything up to here is closed.
    closed_to: i64,
    /// Sources that a block waits for.
    expected: Vec<bool>,
    /// Per source, in how many open blocks it has delivered.
    delivered_open: Vec<u32>,
    closed: u64,
    skipped: u64,
    /// Blocks that closed with enough sources and that nobody has taken over yet, oldest first.
    untaken: Vec<i64>,
    /// Whether all sources are known, so that "all have delivered" means something.
    settled: bool,
}

#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
enum Rule {
    Cycles { wait: u32 },
    Slots,
}

#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
struct Open {
    block: i64,
    present: Vec<bool>,
    /// Expected sources that have not delivered yet.
    missing: usize,
}

impl Blocks {
    /// Cycles that wait for at most `wait` newer ones of a source.
    pub fn cycles(wait: u32) -> Self {
        Self::new(Rule::Cycles { wait: wait.max(1) })
    }

    /// Slots of time.
    pub fn slots() -> Self {
        Self::new(Rule::Slots)
    }

    /// A ledger in which everything up to `closed_to` is closed and nothing is open.
    pub fn closed_until(pairing: Pairing, closed_to: i64) -> Option<Self> {
        let blocks = match pairing {
            Pairing::Cycle | Pairing::Day => Self::cycles(1),
            Pairing::Slot { .. } => Self::slots(),
            Pairing::None => return None,
        };
        Some(Self {
            closed_to,
            ..blocks
        })
    }

    fn new(rule: Rule) -> Self {
        Self {
            rule,
            open: VecDeque::new(),
            closed_to: i64::MIN,
            expected: Vec::new(),
            delivered_open: Vec::new(),
            closed: 0,
            skipped: 0,
            untaken: Vec::new(),
            settled: true,
        }
    }

    /// A new source, which is expected from now on.
    pub fn add_source(&mut self) {
        self.expected.push(true);
        self.delivered_open.push(0);
        for open in &mut self.open {
            open.present.push(false);
            open.missing += 1;
        }
    }

    /// Whether blocks wait for a source. Stopping to wait may close blocks.
    pub fn expect(&mut self, source: usize, yes: bool) {
        if let Some(e) = self.expected.get_mut(source)
            && *e != yes
        {
            *e = yes;
            for open in self.open.iter_mut().filter(|o| !o.present[source]) {
                open.missing = if yes {
                    open.missing + 1
                } else {
                    open.missing - 1
                };
            }
            self.close_complete();
        }
    }

    /// Enters a delivery. `false` when the block is already closed: the value is late.
    pub fn deliver(&mut self, source: usize, block: i64) -> bool {
        if block <= self.closed_to {
            return false;
        }
        let at = self.open.partition_point(|o| o.block < block);
        if self.open.get(at).is_none_or(|o| o.block != block) {
            let present = vec![false; self.expected.len()];
            let missing = self.waited_for();
            self.open.insert(
                at,
                Open {
                    block,
                    present,
                    missing,
                },
            );
        }
        let open = &mut self.open[at];
        if !std::mem::replace(&mut open.present[source], true) {
            open.missing -= usize::from(self.expected[source]);
            self.delivered_open[source] += 1;
        }
        if self.first_is_done(source) {
            self.close_complete();
        }
        true
    }

    /// Whether this delivery of a source can have made the oldest block complete, or overtaken it: all that
    /// has to be asked after one delivery, however many sources there are.
    fn first_is_done(&self, source: usize) -> bool {
        let Some(first) = self.open.front() else {
            return false;
        };
        let overtaken = match self.rule {
            Rule::Cycles { wait } => {
                self.delivered_open[source] - u32::from(first.present[source]) >= wait
            }
            Rule::Slots => self.is_past(first),
        };
        self.is_complete(first) || overtaken || self.open.len() > MOST_OPEN
    }

    fn is_complete(&self, block: &Open) -> bool {
        block.missing == 0 && self.settled && self.expected.contains(&true)
    }

    fn close_complete(&mut self) {
        while let Some(first) = self.open.front() {
            let done = self.is_complete(first) || self.overtaken(first);
            if !done && self.open.len() <= MOST_OPEN {
                return;
            }
            self.close_first();
        }
    }

    fn overtaken(&self, first: &Open) -> bool {
        match self.rule {
            Rule::Cycles { wait } => {
                let newer = self.delivered_open.iter().zip(&first.present);
                newer.into_iter().any(|(n, p)| n - u32::from(*p) >= wait)
            }
            Rule::Slots => self.is_past(first),
        }
    }

    /// One slot past its end is two slots past its start.
    fn is_past(&self, first: &Open) -> bool {
        self.open.back().is_some_and(|o| o.block - first.block >= 2)
    }

    fn close_first(&mut self) {
        let Some(first) = self.open.pop_front() else {
            return;
        };
        for (n, p) in self.delivered_open.iter_mut().zip(&first.present) {
            *n -= u32::from(*p);
        }
        let present = first.present.iter().filter(|p| **p).count();
        if present >= 2 && 2 * present >= self.waited_for() {
            self.closed += 1;
            self.untaken.push(first.block);
        } else {
            self.skipped += 1;
        }
        self.closed_to = first.block;
    }

    fn waited_for(&self) -> usize {
        self.expected.iter().filter(|e| **e).count()
    }

    /// The blocks that have closed with enough sources since they were last asked for, oldest first.
    pub fn take_closed(&mut self) -> Vec<i64> {
        std::mem::take(&mut self.untaken)
    }

    /// The newest closed block; `i64::MIN` before the first.
    pub fn closed_to(&self) -> i64 {
        self.closed_to
    }

    /// The newest block anybody has delivered into.
    pub fn newest(&self) -> Option<i64> {
        let closed = (self.closed_to != i64::MIN).then_some(self.closed_to);
        self.open.back().map(|o| o.block).or(closed)
    }

    /// (closed, skipped, open).
    pub fn counts(&self) -> (u64, u64, u64) {
        (self.closed, self.skipped, self.open.len() as u64)
    }

    /// Whether all sources are known; until then blocks close only when they are overtaken.
    pub fn settle(&mut self, settled: bool) {
        self.settled = settled;
    }

    /// Changes how many newer cycles a cycle waits for.
    pub fn set_wait(&mut self, wait: u32) {
        if let Rule::Cycles { wait: current } = &mut self.rule {
            *current = wait.max(1);
        }
    }
}
