//! The configuration twice: as written (every field optional, with its place in the file) and as
//! used (checked, complete). Converting reports every fault at once.
//!
//! The way of a key: `raw` tree of the file, with the `environment` laid over it, read by `section`
//! into `written`, turned by `convert` into `used`. Each step says what is wrong and goes on, so that
//! all faults come together.
//!
//! Reading the file, the environment and the time zone database happens here; the files of secrets
//! and certificates are opened by [`connection`], anew for each connection to the broker.

mod cautions;
mod check;
pub mod connection;
mod convert;
mod environment;
mod fault;
mod forms;
mod keys;
mod list;
mod raw;
mod section;
mod used;
mod written;
mod written_payload;

#[cfg(test)]
mod tests;

use std::path::Path;

use fault::FaultList;

pub use crate::model::Shift;
pub use cautions::bank_cautions;
pub use check::{duration_us as duration_from_words, words as duration_words};
pub use environment::environment;
pub use fault::{Fault, Faults, Ink, Place};
pub use forms::{
    Belief, CsvForm, DecimalMark, Fields, Items, JsonForm, NameTemplate, Of, OpcUaForm,
    PayloadForm, Pointer, Rebirth, SenMlForm, SourceAt, SparkplugForm, TimeForm, Turn, UnitAt,
};
pub use list::{Origin, Origins, Setting};
pub use used::{
    AtMost, Broker, Encryption, Feed, Mail, Mailbox, Means, Outlet, PlantSettings, Program,
    Protocol, RecordingColumns, Settings, StoreSettings, ToldBy, TopicTemplate, WebSettings,
    Webhook,
};

/// Reads the file and the variables laid over it ([`environment`] gives the process's).
///
/// # Errors
/// Every fault there is; a file that cannot be read is one.
pub fn load(
    path: &Path,
    variables: impl IntoIterator<Item = (String, String)>,
) -> Result<Settings, Faults> {
    let name = path.display().to_string();
    let alone = |message: String, hint: &str| {
        let mut faults = FaultList::default();
        faults.add(&Place::File, message, hint);
        faults.finish(&name, "")
    };
    let bytes = std::fs::read(path).map_err(|error| {
        let hint = "check the path, and whether this user may read the file";
        alone(format!("the file cannot be read: {error}"), hint)
    })?;
    let text = String::from_utf8(bytes).map_err(|error| {
        let good = error.utf8_error().valid_up_to();
        let before = error.as_bytes().iter().take(good);
        let line = before.filter(|byte| **byte == b'\n').count() + 1;
        let hint = "save the file in UTF-8";
        alone(format!("line {line} is not UTF-8 text"), hint)
    })?;
    Settings::parse(&text, &name, variables)
}

impl Settings {
    /// Reads the text of a configuration; `file_name` is where it came from, for people.
    ///
    /// # Errors
    /// Every fault there is.
    pub fn parse(
        text: &str,
        file_name: &str,
        variables: impl IntoIterator<Item = (String, String)>,
    ) -> Result<Self, Faults> {
        let mut faults = FaultList::default();
        let settings = raw::from_text(text, &mut faults).and_then(|mut root| {
            environment::lay_over(&mut root, variables, &mut faults);
            let origins = Origins::of(&root);
            let written = written::Written::read(root, &mut faults);
            convert::used(written, origins, &mut faults)
        });
        match settings {
            Some(settings) if faults.is_empty() => Ok(settings),
            _ => Err(faults.finish(file_name, text)),
        }
    }
}
