//! Log lines on stderr, as text or JSON.

use std::io::IsTerminal;

use tracing_subscriber::EnvFilter;

use super::args::LogForm;

/// What is told without `RUST_LOG`: everything of ours that an operator may want to know. The
/// libraries tell their errors to us, and we tell them in words; twice is too often.
const USUAL: &str = "warn,evenrow=info,sled=off,rumqttc=off";

/// Starts telling. Where something else tells already (a test, an embedding program), that stays.
pub fn start(form: LogForm) {
    let filter = EnvFilter::try_from_default_env().unwrap_or_else(|_| EnvFilter::new(USUAL));
    let lines = tracing_subscriber::fmt()
        .with_env_filter(filter)
        .with_writer(std::io::stderr);
    let started = match form {
        LogForm::Json => lines.json().try_init(),
        LogForm::Text => lines
            .with_ansi(std::io::stderr().is_terminal())
            .with_target(false)
            .try_init(),
    };
    if let Err(e) = started {
        tracing::debug!("log lines go where they went before: {e}");
    }
}
