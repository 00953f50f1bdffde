//! The configuration twice: as written (every field optional, with its place in the file) and as
//! used (checked, complete). Converting reports every fault at once.
//!
//! Reading the file, the environment and the time zone database happens here; the files of secrets
//! and certificates are opened by [`connection`], anew for each connection to the broker.

pub mod connection;
mod used;

pub use used::{
    Broker, Feed, JsonPointers, PayloadForm, PlantSettings, Protocol, RecordingColumns, Settings,
    Shift, StoreSettings, TimeForm, TopicTemplate, WebSettings,
};
