//! Log lines on stderr, as text or JSON.

use std::io::IsTerminal;

use tracing_subscriber::EnvFilter;

use super::args::LogForm;

/// What is told without `RUST_LOG`: everything of ours that an operator may want to know. The
/// libraries tell their errors to us, and we tell them in words; twice is too often.
const USUAL: &str = "warn,evenrow=info,sled=off,rumqttc=off";

/// What the demo tells without `RUST_LOG`: its own words are on stdout, so only what goes wrong. Its
/// broker lives in the process and has nothing to say to anybody; that it ends the first connection when
/// asked how many messages it dropped (it is not asked again) is nothing a person has to be told.
#[cfg(feature = "demo")]
const DEMO: &str = "off,evenrow=warn,evenrow::intake::mqtt=error";

/// Starts telling what the daemon tells.
pub fn start(form: LogForm) {
    start_with(form, USUAL);
}

/// Starts telling what the demo tells.
#[cfg(feature = "demo")]
pub fn start_demo() {
    start_with(LogForm::Text, DEMO);
}

/// Where something else tells already (a test, an embedding program), that stays.
fn start_with(form: LogForm, usual: &str) {
    let filter = EnvFilter::try_from_default_env().unwrap_or_else(|_| EnvFilter::new(usual));
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
