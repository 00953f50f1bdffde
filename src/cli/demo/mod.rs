//! `evenrow demo`: the whole thing on one machine, with a broker inside the process and a simulated
//! line of an invented plant.
//!
//! [`filler`] is the plant, [`story`] is what goes wrong in it and when, `line` publishes it, `stage`
//! puts broker, line, daemon and bulletin together. The filler and the story are there without the
//! `demo` feature too: the recordings in `demo-feeds` are made from them.

#[cfg(feature = "demo")]
mod broker;
#[cfg(feature = "demo")]
mod bulletin;
pub mod filler;
#[cfg(feature = "demo")]
mod line;
#[cfg(feature = "demo")]
mod page;
#[cfg(feature = "demo")]
mod scene;
#[cfg(feature = "demo")]
mod stage;
pub mod story;

#[cfg(feature = "demo")]
pub use stage::run;
