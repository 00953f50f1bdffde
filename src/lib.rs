//! evenrow watches the parallel sources of one operation (fill heads, cavities, spindles,
//! machines) and tells people when some of them drift apart, which ones, since when and by how much.
//!
//! The rooms, from left to right; a room uses only rooms to its left, and `tests/tidy.rs` checks it:
//!
//! | room | what it is for |
//! | --- | --- |
//! | [`stats`] | plain numbers in, plain results out; knows nothing of a plant |
//! | [`model`] | ids, times, exact decimal values, measurement, characteristic, bank |
//! | [`window`] | one source's ring of newest values; a bank's alignment by cycle or slot |
//! | [`verdict`] | windows -> look -> finding; naming, since when, advice, clearing |
//! | [`notice`] | the life cycle of a notice, its wording, deliveries as data |
//! | [`engine`] | owns every bank: `handle(event, now) -> effects` |
//! | [`settings`] | the configuration as written and as used, with every fault at once |
//! | [`clock`] | the only reader of clocks |
//! | [`intake`] | payloads, topics, MQTT, recorded files |
//! | [`store`] | the embedded store and its in-memory twin |
//! | [`outlets`] | notices that leave |
//! | [`web`] | pages, pictures, HTTP interface, metrics |
//! | [`daemon`] | wiring: the loop that waits and the loop that applies |
//! | [`cli`] | the commands |
//!
//! From `stats` to `engine` there is no clock, no randomness and no input or output: the engine is a
//! function of its events. Start reading at [`engine`].
#![forbid(unsafe_code)]
#![warn(missing_docs)]

pub mod cli;
pub mod clock;
pub mod daemon;
pub mod engine;
pub mod intake;
pub mod model;
pub mod notice;
pub mod outlets;
pub mod settings;
pub mod stats;
pub mod store;
pub mod verdict;
pub mod web;
pub mod window;
