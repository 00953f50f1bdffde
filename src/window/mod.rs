//! The newest measurements of each source, and how values of different sources belong together.
//!
//! Owns the rings and the ledger of open cycles. What must hold: a ring never has more values than
//! the longest span and is in order; a double never enters; cycles close by the order of data, never
//! by a clock. Deliberately absent: statistics, times to wait, who is told.

mod align;
mod numbers;
mod ring;
mod windows;

pub use align::Blocks;
pub use ring::{Entry, Ring};
pub use windows::{Accepted, Arriving, Windows};

#[cfg(test)]
mod tests;
