//! `evenrow rehearse`: recorded measurements through the engine as fast as it goes.
//!
//! The same engine as in the daemon, given the recording's own times as the present, so what it says
//! is what the daemon would have said. [`conductor`] feeds it, [`ledger`] remembers what came of it,
//! `table` and `lines` tell it. Deliberately absent: store, broker and port; nothing of the
//! plant's is touched.

pub mod conductor;
pub mod ledger;
mod lines;
mod table;

use std::io::{self, Write};
use std::path::PathBuf;
use std::sync::Arc;
use std::time::Duration;

use indicatif::{ProgressBar, ProgressStyle};

use crate::engine::{BankView, Engine, Plant};
use crate::intake::recording::{self, Fault, How, OpenError, ReadError, Source};
use crate::model::BankIx;
use crate::settings::{RecordingColumns, Settings};

use super::args::RehearseArgs;
use super::configuration;
use super::exit::Exit;
use conductor::Conductor;
use ledger::Ledger;
use lines::Lines;

/// Measurements between two movements of the progress bar.
const TICK: u64 = 1_000;

/// Why a rehearsal ended early.
#[derive(Debug, thiserror::Error)]
pub(super) enum RehearseError {
    #[error("there is no bank '{name}' in the configuration; it has {known}")]
    NoSuchBank { name: String, known: String },
    #[error(transparent)]
    Open(#[from] OpenError),
    #[error(transparent)]
    Read(#[from] ReadError),
    #[error("the result cannot be written: {0}")]
    Write(#[from] io::Error),
}

/// Runs the rehearsal and prints what came of it.
pub fn run(args: RehearseArgs) -> Exit {
    let settings = match configuration::read(&args.config) {
        Ok(settings) => settings,
        Err(exit) => return exit,
    };
    match perform(&args, &settings) {
        Ok(ledger) if args.fail_on_notice && ledger.notices_raised() > 0 => Exit::NoticeRaised,
        Ok(_) => Exit::Done,
        Err(error) => {
            complain(&error.to_string());
            match error {
                RehearseError::NoSuchBank { .. } => Exit::Usage,
                // Whoever read our output has seen enough.
                RehearseError::Write(e) if e.kind() == io::ErrorKind::BrokenPipe => Exit::Done,
                _ => Exit::Failed,
            }
        }
    }
}

/// Feeds every recording, then takes a last look at what is there.
fn perform(args: &RehearseArgs, settings: &Settings) -> Result<Ledger, RehearseError> {
    let how = how(args, settings)?;
    let mut conductor = conductor(settings);
    let mut ledger = Ledger::new(&args.recordings);
    let mut out = Telling::new(args.json);
    let read = feed(args, &how, &mut conductor, &mut ledger, &mut out);
    // A recording that breaks off is told after what was there has been looked at.
    if let Err(RehearseError::Write(_)) = read {
        return read.map(|()| ledger);
    }
    conductor.finish(&mut ledger, &mut |said| out.said(said))?;
    out.end(&ledger, settings)?;
    read.map(|()| ledger)
}

/// What the engine knows of a bank, by its place, after the recordings; nothing is told.
///
/// # Errors
/// When a recording cannot be read.
pub(super) fn known_after(
    args: &RehearseArgs,
    settings: &Settings,
    bank: usize,
) -> Result<Arc<BankView>, RehearseError> {
    let how = how(args, settings)?;
    let mut conductor = conductor(settings);
    let mut ledger = Ledger::new(&args.recordings);
    let mut out = Telling::Table;
    feed(args, &how, &mut conductor, &mut ledger, &mut out)?;
    conductor.finish(&mut ledger, &mut |_| Ok(()))?;
    Ok(conductor.bank(bank))
}

/// The plant's engine, before the first measurement.
fn conductor(settings: &Settings) -> Conductor {
    let plant = Plant {
        name: settings.plant.name.clone(),
        zone: settings.plant.zone.clone(),
        pages: settings.pages(),
        // Nothing leaves a rehearsal.
        routes: Vec::new(),
        manners: settings.manners.clone(),
    };
    Conductor::new(Engine::new(plant, settings.banks.clone()))
}

/// Which bank, which columns.
fn how(args: &RehearseArgs, settings: &Settings) -> Result<How, RehearseError> {
    let names: Vec<_> = settings.banks.iter().map(|b| b.name.clone()).collect();
    let bank = match &args.bank {
        None => None,
        Some(name) => match names.iter().position(|n| **n == **name) {
            Some(at) => u16::try_from(at).ok().map(BankIx),
            None => {
                return Err(RehearseError::NoSuchBank {
                    name: name.clone(),
                    known: names.join(", "),
                });
            }
        },
    };
    let feed = settings.feeds.get(bank.map_or(0, BankIx::index));
    let configured = feed.map_or_else(RecordingColumns::default, |f| f.recording.clone());
    let columns = RecordingColumns {
        time: args.time_column.clone().unwrap_or(configured.time),
        source: args.source_column.clone().unwrap_or(configured.source),
        value: args.value_column.clone().unwrap_or(configured.value),
        cycle: args.cycle_column.clone().unwrap_or(configured.cycle),
        bank: configured.bank,
    };
    Ok(How {
        banks: names,
        bank,
        columns,
        beliefs: settings
            .feeds
            .iter()
            .map(|feed| feed.belief.clone())
            .collect(),
    })
}

/// Reads the recordings one after the other.
fn feed(
    args: &RehearseArgs,
    how: &How,
    conductor: &mut Conductor,
    ledger: &mut Ledger,
    out: &mut Telling,
) -> Result<(), RehearseError> {
    let progress = progress();
    for path in &args.recordings {
        let recording = recording::open(&Source::named(path), how)?;
        progress.set_message(recording.name().to_owned());
        for row in recording {
            match row {
                Ok(recorded) => {
                    ledger.read(&recorded);
                    conductor.take(recorded.measurement, ledger, &mut |said| out.said(said))?;
                }
                Err(Fault::Refused { refusal, .. }) => {
                    ledger.refused(&refusal);
                    conductor.refused(refusal, ledger, &mut |said| out.said(said))?;
                }
                Err(Fault::Broken(error)) => return Err(error.into()),
            }
            if ledger.rows().is_multiple_of(TICK) {
                progress.set_position(ledger.rows());
            }
        }
    }
    progress.finish_and_clear();
    Ok(())
}

/// On stderr, and only where somebody watches. The length of a compressed recording is not known
/// beforehand, so it counts instead of filling.
fn progress() -> ProgressBar {
    let bar = ProgressBar::new_spinner();
    let style = ProgressStyle::with_template("{spinner} {msg}: {human_pos} values, {per_sec}");
    if let Ok(style) = style {
        bar.set_style(style);
    }
    bar.enable_steady_tick(Duration::from_millis(100));
    bar
}

/// Where the result goes: lines as they come, or a table at the end.
enum Telling {
    Lines(Lines<io::BufWriter<io::Stdout>>),
    Table,
}

impl Telling {
    fn new(json: bool) -> Self {
        if json {
            Self::Lines(Lines::new(io::BufWriter::new(io::stdout())))
        } else {
            Self::Table
        }
    }

    fn said(&mut self, said: &ledger::Said) -> io::Result<()> {
        match self {
            Self::Lines(lines) => lines.said(said),
            Self::Table => Ok(()),
        }
    }

    fn end(&mut self, ledger: &Ledger, settings: &Settings) -> io::Result<()> {
        match self {
            Self::Lines(lines) => lines.summary(ledger),
            Self::Table => writeln!(
                io::stdout(),
                "{}",
                table::tell(ledger, &settings.plant.zone)
            ),
        }
    }
}

/// Messages go to stderr.
fn complain(text: &str) {
    // A closed stderr leaves nobody to tell.
    let _ = writeln!(io::stderr(), "{text}");
}

/// The names of recordings as given.
fn names(recordings: &[PathBuf]) -> Vec<String> {
    let name = |path: &PathBuf| Source::named(path).name();
    recordings.iter().map(name).collect()
}
