//! The newest 640 cycles of all compared sources side by side, as running sums and counts, so that a
//! window's mean is one subtraction.
//!
//! Must hold: a window never reaches over a change of who is compared in which somebody left; sums are
//! counted from the oldest row anew each time around, so that they keep their digits.

use serde::{Deserialize, Serialize};

use crate::verdict::track::Moment;

/// Cycles held: the longest window of the watch.
pub const HELD: usize = 640;

/// The cycles, as a ring of running sums; a column per compared source.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Rows {
    columns: usize,
    /// Cycles held, at most [`HELD`].
    held: usize,
    /// The row of sums before the next cycle.
    head: usize,
    sums: Vec<f64>,
    counts: Vec<u16>,
    moments: Vec<Moment>,
    /// Cycles since a value was missing.
    complete: usize,
}

impl Rows {
    /// No cycles of `columns` sources.
    pub fn new(columns: usize) -> Self {
        Self {
            columns,
            sums: vec![0.0; columns],
            counts: vec![0; columns],
            ..Self::default()
        }
    }

    /// Cycles held.
    pub fn held(&self) -> usize {
        self.held
    }

    /// Makes room for a source at a column; it has been missing until now.
    pub fn insert_column(&mut self, at: usize) {
        let rows = self.sums.len() / self.columns.max(1);
        let (mut sums, mut counts) = (Vec::new(), Vec::new());
        for row in 0..rows {
            let range = row * self.columns..(row + 1) * self.columns;
            sums.extend_from_slice(&self.sums[range.clone()]);
            sums.insert(row * (self.columns + 1) + at, 0.0);
            counts.extend_from_slice(&self.counts[range]);
            counts.insert(row * (self.columns + 1) + at, 0);
        }
        (self.sums, self.counts) = (sums, counts);
        self.columns += 1;
        self.complete = 0;
    }

    /// Takes in a cycle; NaN is missing.
    pub fn push(&mut self, at: Moment, residuals: &[f64]) {
        let k = self.columns;
        let next = (self.head + 1) % (HELD + 1);
        if self.sums.len() < (next + 1) * k {
            self.sums.resize((next + 1) * k, 0.0);
            self.counts.resize((next + 1) * k, 0);
        }
        if next == 0 {
            self.rebase();
        }
        // The row before a cycle keeps when that cycle was.
        match self.moments.get_mut(self.head) {
            Some(moment) => *moment = at,
            None => self.moments.push(at),
        }
        let (from, to) = (self.head * k, next * k);
        let mut whole = true;
        for (c, r) in residuals.iter().enumerate() {
            let there = !r.is_nan();
            whole &= there;
            self.sums[to + c] = self.sums[from + c] + if there { *r } else { 0.0 };
            self.counts[to + c] = self.counts[from + c].wrapping_add(u16::from(there));
        }
        self.complete = if whole { self.complete + 1 } else { 0 };
        self.head = next;
        self.held = (self.held + 1).min(HELD);
    }

    /// Sums are counted from the newest row on: what a long offset adds up to would cost digits.
    fn rebase(&mut self) {
        let k = self.columns;
        let base: Vec<f64> = self.sums[self.head * k..(self.head + 1) * k].to_vec();
        for row in self.sums.chunks_exact_mut(k.max(1)) {
            for (sum, base) in row.iter_mut().zip(&base) {
                *sum -= base;
            }
        }
    }

    fn row_back(&self, cycles: usize) -> usize {
        (self.head + HELD + 1 - cycles) % (HELD + 1)
    }

    /// Sums of the newest `n` cycles, by column, and how many values each has (`None`: all of them).
    pub fn window(&self, n: usize, sums: &mut Vec<f64>, counts: &mut Vec<u16>) -> Whole {
        let k = self.columns;
        let (new, old) = (self.head * k, self.row_back(n) * k);
        let (newer, older) = (&self.sums[new..new + k], &self.sums[old..old + k]);
        sums.clear();
        sums.extend(newer.iter().zip(older).map(|(a, b)| a - b));
        if self.complete >= n {
            return Whole::Yes;
        }
        let (newer, older) = (&self.counts[new..new + k], &self.counts[old..old + k]);
        counts.clear();
        counts.extend(newer.iter().zip(older).map(|(a, b)| a.wrapping_sub(*b)));
        Whole::No
    }

    /// When the cycle `back` cycles ago was; 1 is the newest.
    pub fn moment(&self, back: usize) -> Option<Moment> {
        (1..=self.held)
            .contains(&back)
            .then(|| self.moments[self.row_back(back)])
    }

    /// The residual of a column `back` cycles ago, NaN where missing.
    pub fn residual(&self, column: usize, back: usize) -> f64 {
        let at = |b: usize| self.row_back(b) * self.columns + column;
        let (new, old) = (at(back - 1), at(back));
        if self.counts[new] == self.counts[old] {
            return f64::NAN;
        }
        self.sums[new] - self.sums[old]
    }
}

/// Whether a window misses no value.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Whole {
    /// Every source has a value in every cycle.
    Yes,
    /// The counts tell.
    No,
}
