//! Measurements on their way in: payload decoders, topics, MQTT, recorded files.
//!
//! | part | what it is for |
//! | --- | --- |
//! | [`payload`] | bytes -> value, source, time, cycle; or the reason why not. Pure |
//! | [`topics`] | which filters to subscribe, and which banks a topic belongs to. Pure |
//! | [`names`] | one shared copy of each name, in bounded memory |
//! | [`arrival`] | one message -> its measurements and refusals for all banks. Pure |
//! | [`nodes`] | the same for Sparkplug's edge nodes, whose messages build on each other. Pure |
//! | [`mqtt`] | the connection that listens |
//! | [`recording`] | CSV and JSON lines from files, for `rehearse` |
//!
//! What must hold: no bytes panic; every arrival becomes a measurement or a counted refusal; a
//! number stays decimal text until [`crate::model::Value`] takes it. Deliberately absent: judging
//! a measurement against the clock, the bank's sources or earlier values: the engine does that.

pub mod arrival;
#[cfg(test)]
mod fixture;
pub mod mqtt;
pub mod names;
pub mod nodes;
pub mod payload;
pub mod recording;
pub mod topics;
