//! The engine owns every bank and is a function of its events: `handle(event, now) -> effects`.
//!
//! The live daemon, `rehearse`, recovery after a crash and the simulations run this same code.
//! Deliberately absent: tokio, files, sockets, clocks, random numbers, logs. What the engine wants
//! done it says as an [`Effect`]; what happened to it comes as an [`Event`].

mod apart;
mod bank;
mod commands;
mod condition;
mod conditions;
mod core;
mod event;
mod evidence;
mod history;
mod incident;
mod judge;
mod level;
mod line;
mod load;
mod look;
mod natural;
mod papers;
mod restore;
mod send;
mod shifts;
mod snapshot;
mod source;
mod stuck;
mod usual;
mod view;
mod watching;

pub use self::core::Engine;
pub use condition::{Condition, Part};
pub use event::{Command, Due, Effect, Event, Judged, Onward, Outcome, Record, Ticket, Turn};
pub use evidence::{Evidence, Premises, WatchSaid};
pub use history::{History, HistoryError, Page};
pub use load::Load;
pub use natural::natural;
pub use papers::{Raised, Tally};
pub use restore::RestoreError;
pub use shifts::FEWEST_VALUES;
pub use snapshot::{
    BankView, Cycles, OutletView, Plant, RefusalView, RunningShift, ShiftsView, Snapshot,
    SourceState, SourceView, WatchView, WindowValue, WindowView,
};
pub use view::shown_look;
pub use watching::watch_terms;
