//! The engine owns every bank and is a function of its events: `handle(event, now) -> effects`.
//!
//! The live daemon, `rehearse`, recovery after a crash and the simulations run this same code.
//! Deliberately absent: tokio, files, sockets, clocks, random numbers, logs. What the engine wants
//! done it says as an [`Effect`]; what happened to it comes as an [`Event`].

mod apart;
mod bank;
mod commands;
mod condition;
mod core;
mod event;
mod history;
mod incident;
mod line;
mod look;
mod natural;
mod restore;
mod send;
mod shifts;
mod snapshot;
mod source;
mod usual;
mod view;
mod watching;

pub use self::core::Engine;
pub use condition::{Condition, Part};
pub use event::{Command, Due, Effect, Event, Onward, Outcome, Record, Ticket, Turn};
pub use history::{History, HistoryError, Page};
pub use restore::RestoreError;
pub use shifts::FEWEST_VALUES;
pub use snapshot::{
    BankView, Cycles, OutletView, Plant, RefusalView, RunningShift, ShiftsView, Snapshot,
    SourceState, SourceView, WatchView, WindowValue, WindowView,
};
pub use view::shown_look;
