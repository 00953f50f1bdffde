//! Pages, pictures, the HTTP interface and the metrics, all from the snapshot and the history.
//!
//! Owns what travels over HTTP: who may ask ([`tokens`], `sessions`, `access`), the forms of answers
//! (`pages`, `pictures`, [`wire`], [`metrics`]), and nothing of the plant. What must hold: pages of the
//! present and metrics are functions of the snapshot; the past comes through
//! [`crate::engine::History`]; a change goes out as an [`Ask`] and never touches state. Everything a
//! page needs is embedded, and no page asks another host for anything. Deliberately absent:
//! encryption (a proxy in front does it) and any decision about sources.

mod access;
mod acknowledge;
mod address;
mod api;
mod assets;
mod days;
mod dress;
mod durations;
mod format;
mod health;
mod kept;
mod line;
mod live;
pub mod metrics;
mod openapi;
mod pages;
mod pictures;
mod problem;
mod pulse;
#[cfg(test)]
mod sample;
mod server;
mod sessions;
mod sharing;
mod signin;
mod site;
mod standing;
mod story;
#[cfg(test)]
mod tests;
pub mod tokens;
pub mod wire;

pub use durations::Durations;
pub use pictures::enclosed::picture_of;
pub use server::{ServeError, serve};
pub use site::{Ask, Site};
