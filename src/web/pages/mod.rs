//! Pages for people: HTML from the snapshot and the history.
//!
//! What must hold: every page is whole without scripts; every figure has its unit, every time its
//! zone; a state is a word, then a shape, then a colour. Deliberately absent: decisions (what a bank's
//! state is called is in [`super::standing`]; everything else was decided by the engine).

pub mod about;
pub mod bank;
pub mod deeds;
pub mod frame;
pub mod handover;
mod history;
mod letters;
pub mod line;
mod looks;
pub mod notice;
pub mod notices;
pub mod plant;
pub mod settings;
mod shifts;
pub mod signin;
pub mod source;
mod source_pictures;
mod sources;
mod watch;
mod when;
