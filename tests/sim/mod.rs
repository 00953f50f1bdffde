//! The proof by simulation: plant data from seeds, the daemon's own engine, what it must show.
//!
//! `main.rs` runs the short form as a test, `tests/bench/sim.rs` the full form with a progress bar; both
//! are this code over the one table in `rows.rs`.
//!
//! What must hold: every figure follows from the table and its seeds, whatever the number of threads;
//! the engine is driven as the daemon drives it (events in, notices out), and nothing else of it decides.
//! Deliberately absent: any knowledge of how the engine comes to a call.

pub mod crew;
mod feed;
#[path = "../common/line.rs"]
mod line;
mod measure;
mod notices;
mod oracle;
mod rare;
mod rig;
pub mod rows;
pub mod table;
mod trouble;
