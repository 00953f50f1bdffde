//! `evenrow demo`: the whole thing on one machine, with a broker inside the process and a simulated
//! line of an invented plant.
//!
//! [`filler`] is the plant, [`story`] is what goes wrong in it and when. Both are there without the
//! `demo` feature too: the recordings in `demo-feeds` are made from them.

pub mod filler;
pub mod story;
