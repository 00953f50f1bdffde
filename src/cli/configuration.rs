//! Reading the configuration, the same for every command.

use std::io::IsTerminal;
use std::path::Path;

use crate::settings::{self, Ink, Settings};

use super::exit::Exit;

/// The configuration, with the environment laid over it. Faults are told on stderr.
///
/// # Errors
/// [`Exit::Configuration`] when anything is wrong with it.
pub fn read(path: &Path) -> Result<Settings, Exit> {
    settings::load(path, settings::environment()).map_err(|faults| {
        eprint!("{}", faults.report(ink()));
        Exit::Configuration
    })
}

/// Colour only for a person at a terminal who has not asked for none (`NO_COLOR`).
fn ink() -> Ink {
    let unwanted = std::env::var_os("NO_COLOR").is_some_and(|value| !value.is_empty());
    if std::io::stderr().is_terminal() && !unwanted {
        Ink::Colour
    } else {
        Ink::Plain
    }
}
