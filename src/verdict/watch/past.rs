//! What was, for naming, sizes and starts: sums of blocks of fifty cycles back to 10 000 cycles, and the
//! residuals of the newest 640.

use std::collections::VecDeque;

use serde::{Deserialize, Serialize};

use crate::model::SourceIx;
use crate::verdict::track::Moment;

use super::block::CYCLES;
use super::hull::LONGEST;
use super::rows::Rows;

/// Starts whose statistic lies within this of the maximum belong to the 95 % set (simulated for the
/// maximum over all starts; twice a log likelihood ratio).
pub const SET_95: f64 = 7.35;

/// One block of fifty cycles, or what has passed of it; sums are kept short, they are read by people.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
struct Block {
    first: u64,
    at: Moment,
    cycles: u8,
    sums: Vec<f32>,
    counts: Vec<u8>,
}

/// The blocks kept, oldest first, a column per compared source.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Past {
    blocks: VecDeque<Block>,
    running: Vec<f64>,
}

impl Past {
    /// Takes in a cycle; NaN is missing.
    #[inline]
    pub fn push(&mut self, cycle: u64, at: Moment, residuals: &[f64]) {
        let full = |b: &Block| u32::from(b.cycles) == CYCLES;
        if self.blocks.back().is_none_or(full) {
            self.begin_block(cycle, at, residuals.len());
        }
        let Some(block) = self.blocks.back_mut() else {
            return;
        };
        block.cycles += 1;
        let columns = self.running.iter_mut().zip(&mut block.counts);
        for ((sum, count), r) in columns.zip(residuals) {
            let there = !r.is_nan();
            *sum += if there { *r } else { 0.0 };
            *count += u8::from(there);
        }
        if full(block) {
            block.sums = self.running.iter().map(|s| *s as f32).collect();
        }
    }

    fn begin_block(&mut self, cycle: u64, at: Moment, columns: usize) {
        if self.blocks.len() as u64 * u64::from(CYCLES) >= LONGEST {
            self.blocks.pop_front();
        }
        self.running.clear();
        self.running.resize(columns, 0.0);
        self.blocks.push_back(Block {
            first: cycle,
            at,
            cycles: 0,
            sums: Vec::new(),
            counts: vec![0; columns],
        });
    }

    /// Makes room for a source at a column; it has been missing until now.
    pub fn insert_column(&mut self, at: usize) {
        for block in &mut self.blocks {
            if !block.sums.is_empty() {
                block.sums.insert(at, 0.0);
            }
            block.counts.insert(at, 0);
        }
        if !self.running.is_empty() {
            self.running.insert(at, 0.0);
        }
    }

    /// Everything before cycle number `newest` and including it, told apart by columns.
    pub fn tell(&self, sources: Vec<SourceIx>, rows: &Rows, newest: u64) -> ContrastBlocks {
        let k = sources.len();
        let held = rows.held();
        let oldest_row = (newest + 1).saturating_sub(held as u64);
        let mut told = ContrastBlocks {
            sources,
            stretches: Vec::new(),
        };
        for block in self.blocks.iter().filter(|b| b.first < oldest_row) {
            let end = block.first + u64::from(block.cycles);
            let sums = if block.sums.is_empty() {
                None
            } else {
                Some(&block.sums)
            };
            let sum = |c: usize| sums.map_or(self.running[c], |s| f64::from(s[c]));
            let mut stretch = Stretch {
                at: block.at,
                cycles: (oldest_row.min(end) - block.first) as u32,
                sums: (0..k).map(sum).collect(),
                counts: block.counts.iter().map(|c| u32::from(*c)).collect(),
            };
            // What the rows hold of this block is told by them.
            for back in (newest + 1).saturating_sub(end) + 1..=held as u64 {
                stretch.take_out((0..k).map(|c| rows.residual(c, back as usize)));
            }
            told.stretches.push(stretch);
        }
        for back in (1..=held).rev() {
            let residuals: Vec<f64> = (0..k).map(|c| rows.residual(c, back)).collect();
            if let Some(at) = rows.moment(back) {
                told.stretches.push(Stretch::single(at, residuals));
            }
        }
        told
    }
}

/// Sums and counts per source of successive stretches of cycles, oldest first: blocks of up to fifty
/// cycles, then the newest 640 one by one. Residuals are less the bank's mean of the same cycle, so
/// differences between sources are what they tell.
#[derive(Clone, Debug, PartialEq)]
pub struct ContrastBlocks {
    /// The compared sources; a place in this list is a column.
    pub sources: Vec<SourceIx>,
    /// The stretches.
    pub stretches: Vec<Stretch>,
}

/// Some successive cycles.
#[derive(Clone, Debug, PartialEq)]
pub struct Stretch {
    /// The first of them.
    pub at: Moment,
    /// How many cycles.
    pub cycles: u32,
    /// Sum of the residuals, by column, in the unit.
    pub sums: Vec<f64>,
    /// Number of values, by column.
    pub counts: Vec<u32>,
}

impl Stretch {
    fn single(at: Moment, residuals: Vec<f64>) -> Self {
        let counts = residuals.iter().map(|r| u32::from(!r.is_nan())).collect();
        let sums = residuals.into_iter();
        let sums = sums.map(|r| if r.is_nan() { 0.0 } else { r }).collect();
        Self {
            at,
            cycles: 1,
            sums,
            counts,
        }
    }

    fn take_out(&mut self, residuals: impl Iterator<Item = f64>) {
        for (c, r) in residuals.enumerate().filter(|(_, r)| !r.is_nan()) {
            self.sums[c] -= r;
            self.counts[c] = self.counts[c].saturating_sub(1);
        }
    }

    fn mean(&self, columns: &[usize]) -> Option<f64> {
        let sum: f64 = columns.iter().map(|c| self.sums[*c]).sum();
        let count: u32 = columns.iter().map(|c| self.counts[*c]).sum();
        (count > 0).then(|| sum / f64::from(count))
    }
}

/// A start, and the starts that the data allow at 95 %.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Since {
    /// The most likely one.
    pub start: Moment,
    /// The earliest.
    pub earliest: Moment,
    /// The latest.
    pub latest: Moment,
}

impl ContrastBlocks {
    /// Since when the columns `above` lie more than `margin` above the columns `below`: the start with the
    /// largest ((sum of what lies beyond the margin)+)^2 / n / `variance`, that of one cycle's difference
    /// of means, and all starts within 7.35 of it. `None` when nothing lies beyond.
    pub fn since(
        &self,
        above: &[usize],
        below: &[usize],
        margin: f64,
        variance: f64,
    ) -> Option<Since> {
        let (mut n, mut rise) = (0.0, 0.0);
        let mut newest_first = Vec::with_capacity(self.stretches.len());
        for (i, stretch) in self.stretches.iter().enumerate().rev() {
            if let (Some(a), Some(b)) = (stretch.mean(above), stretch.mean(below)) {
                let cycles = f64::from(stretch.cycles);
                n += cycles;
                rise += cycles * (a - b - margin);
                newest_first.push((f64::max(rise, 0.0).powi(2) / n / variance, i));
            }
        }
        let best = newest_first.iter().max_by(|a, b| a.0.total_cmp(&b.0))?;
        let within = |s: &&(f64, usize)| s.0 >= best.0 - SET_95;
        let latest = newest_first.iter().find(within)?.1;
        let earliest = newest_first.iter().rfind(within)?.1;
        // Within a block nothing is resolved: the set reaches to its neighbours.
        let is_block = |i: usize| self.stretches.get(i).is_some_and(|s| s.cycles > 1);
        let earliest = earliest - usize::from(earliest > 0 && is_block(earliest - 1));
        let latest = latest + usize::from(is_block(latest) && latest + 1 < self.stretches.len());
        (best.0 > 0.0).then_some(Since {
            start: self.stretches[best.1].at,
            earliest: self.stretches[earliest].at,
            latest: self.stretches[latest].at,
        })
    }
}
