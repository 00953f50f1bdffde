//! Pages, pictures, the HTTP interface and the metrics, all from the snapshot and the history.
//!
//! Owns what travels over HTTP: who may ask ([`tokens`], `sessions`, `access`), the forms of answers
//! (`pages`, `pictures`, [`wire`], [`metrics`]), and nothing of the plant. What must hold: pages of the
//! present and metrics are functions of the snapshot; the past comes through
//! [`crate::engine::History`]; a change goes out as an [`Ask`] and never touches state. Everything a
//! page needs is embedded, and no page asks another host for anything; modules use each other in one
//! direction (a test checks it). Deliberately absent: any decision about sources.

mod access;
mod address;
mod api;
mod assets;
mod certificate;
mod days;
mod deeds;
mod dress;
mod durations;
mod format;
pub mod handover;
mod health;
mod kept;
mod limiting;
mod limits;
mod line;
mod live;
pub mod metrics;
mod openapi;
mod pages;
mod pictures;
mod problem;
mod pulse;
mod readings;
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
mod then;
pub mod tokens;
pub mod wire;

pub use api::explain::{of_notice as explain_notice, which as explain_bank};
pub use durations::Durations;
pub use pictures::enclosed::picture_of;
pub use server::{ServeError, serve};
pub use site::{Ask, Site};
