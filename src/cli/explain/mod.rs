//! `evenrow explain`: a look and a call taken apart so that they can be repeated by hand.
//!
//! The running daemon is asked (`ask`); only when none runs is its store opened here. Both give the same
//! form, which `tell` writes for people. Deliberately absent: how anything is worked out.

mod ask;
mod tell;

use std::fs;
use std::io::{self, Write as _};
use std::path::PathBuf;

use crate::clock::Clock;
use crate::engine::HistoryError;
use crate::model::{Bank, Name, Time};
use crate::settings::Settings;
use crate::store;
use crate::web::wire::ExplanationBody;
use crate::web::{explain_bank, explain_notice};

use super::args::ExplainArgs;
use super::configuration;
use super::exit::Exit;
use ask::{AskError, Wanted};

/// Why nothing is explained.
#[derive(Debug, thiserror::Error)]
enum ExplainError {
    #[error("there is no bank '{name}' in the configuration; it has {known}")]
    NoSuchBank { name: String, known: String },
    #[error(transparent)]
    Ask(#[from] AskError),
    #[error("no daemon runs, and {0}")]
    Open(#[from] store::OpenError),
    #[error(transparent)]
    History(#[from] HistoryError),
    #[error("{0}")]
    Nothing(String),
    #[error("no daemon runs, and the store's folder {} does not exist: nothing was ever kept", .0.display())]
    NoStore(PathBuf),
    #[error(
        "the values of this look were not kept (they are kept with calls): there is nothing for --csv"
    )]
    NoValues,
    #[error("the values cannot be written to {}: {why}", file.display())]
    Csv { file: PathBuf, why: io::Error },
    #[error("the result cannot be written: {0}")]
    Write(#[from] io::Error),
}

impl ExplainError {
    fn exit(&self) -> Exit {
        match self {
            Self::NoSuchBank { .. } => Exit::Usage,
            // Whoever read our output has seen enough.
            Self::Write(e) if e.kind() == io::ErrorKind::BrokenPipe => Exit::Done,
            _ => Exit::Failed,
        }
    }
}

/// Runs the command.
pub fn run(args: ExplainArgs) -> Exit {
    let settings = match configuration::read(&args.config) {
        Ok(settings) => settings,
        Err(exit) => return exit,
    };
    match perform(&args, &settings) {
        Ok(()) => Exit::Done,
        Err(error) => {
            // A closed stderr leaves nobody to tell.
            let _ = writeln!(io::stderr(), "{error}");
            error.exit()
        }
    }
}

fn perform(args: &ExplainArgs, settings: &Settings) -> Result<(), ExplainError> {
    let bank = bank(args, settings)?;
    let wanted = Wanted {
        bank: &bank.name,
        at: args.at,
        notice: args.notice.as_deref(),
    };
    let asked = ask::daemon(settings.web.listen, args.token_file.as_deref(), &wanted)?;
    let explained = match asked {
        Some(explained) => explained,
        None => from_store(settings, bank, &wanted)?,
    };
    if let Some(file) = &args.csv {
        let values = explained
            .values_csv
            .as_ref()
            .ok_or(ExplainError::NoValues)?;
        fs::write(file, values).map_err(|why| ExplainError::Csv {
            file: file.clone(),
            why,
        })?;
    }
    let text = if args.json {
        serde_json::to_string(&explained).map_err(io::Error::from)? + "\n"
    } else {
        tell::tell(&explained, &settings.plant.zone)
    };
    io::stdout().write_all(text.as_bytes())?;
    Ok(())
}

fn bank<'a>(args: &ExplainArgs, settings: &'a Settings) -> Result<&'a Bank, ExplainError> {
    let found = settings.banks.iter().find(|b| *b.name == *args.bank);
    found.map(|b| &**b).ok_or_else(|| {
        let known: Vec<&str> = settings.banks.iter().map(|b| &*b.name).collect();
        ExplainError::NoSuchBank {
            name: args.bank.clone(),
            known: known.join(", "),
        }
    })
}

/// Opens the store and reads it as the daemon would.
fn from_store(
    settings: &Settings,
    bank: &Bank,
    wanted: &Wanted,
) -> Result<ExplanationBody, ExplainError> {
    let folder = &settings.store.folder;
    if !folder.exists() {
        return Err(ExplainError::NoStore(folder.clone()));
    }
    let names: Vec<Name> = settings.banks.iter().map(|b| b.name.clone()).collect();
    let now: Time = Clock::System.now();
    let opened = store::open(&settings.store, &names, now)?;
    let history = opened.history.as_ref();
    let found = match wanted.notice {
        Some(id) => explain_notice(history, id)?,
        // Without a daemon there is no look to take now: the newest that was kept stands for it.
        None => {
            let unit = &bank.characteristic.unit;
            let called = explain_bank(history, &bank.name, unit, wanted.at)?;
            match called {
                None if wanted.at.is_none() => explain_bank(history, &bank.name, unit, Some(now))?,
                called => called,
            }
        }
    };
    found.ok_or_else(|| {
        ExplainError::Nothing(match wanted.notice {
            Some(id) => format!("no evidence is kept of a notice \"{id}\""),
            None => format!("nothing was kept of bank \"{}\" then", bank.name),
        })
    })
}
