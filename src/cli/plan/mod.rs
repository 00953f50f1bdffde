//! `evenrow plan`: before trusting a setting, what drift is found, how surely and how soon.
//!
//! The watch itself is tried on simulated measurements of the bank (`trial`; where sources share no
//! cycle the look is, in `looks`), under the setting as configured and its neighbours (`setting`). What is
//! simulated comes from the command line or is learnt from a recording by the same engine as in the
//! daemon (`recorded`). `table`, `body` and `picture` tell it. Deliberately absent: store, broker and port.

pub mod assumed;
mod body;
mod looks;
mod noise;
pub mod outcome;
mod picture;
mod recorded;
pub mod scene;
mod setting;
mod table;
pub mod trial;
mod work;

use std::fs;
use std::io::{self, Write as _};
use std::path::PathBuf;
use std::time::Duration;

use indicatif::{ProgressBar, ProgressStyle};

use crate::model::{Bank, Offsets, Sources};
use crate::settings::Settings;

use super::args::PlanArgs;
use super::configuration;
use super::exit::Exit;
use super::rehearse::RehearseError;
use assumed::Assumed;
use recorded::TooShort;
use scene::Scene;
use setting::Setting;
use work::{Judged, judge, steps};

/// Everything there is to tell.
#[derive(Debug)]
pub struct Plan {
    bank: Bank,
    assumed: Assumed,
    judged: Vec<Judged>,
}

/// Why there is no plan.
#[derive(Debug, thiserror::Error)]
enum PlanError {
    #[error("there are several banks: name one with --bank ({0})")]
    WhichBank(String),
    #[error("there is no bank '{name}' in the configuration; it has {known}")]
    NoSuchBank { name: String, known: String },
    #[error("a bank of one source has nobody to be compared with")]
    Alone,
    #[error(
        "bank '{0}' learns its sources' usual places (offsets = \"learn\"), and how soon a drift from \
         there is found is not planned: take `offsets` out to plan for differences between sources"
    )]
    LearnsOffsets(String),
    #[error(transparent)]
    Recording(#[from] RehearseError),
    #[error(transparent)]
    TooShort(#[from] TooShort),
    #[error(
        "the watch does not learn on values with an sd of {sd} {unit} read to {resolution} {unit}: \
         check --sd and the bank's resolution"
    )]
    NeverLearns {
        sd: f64,
        unit: String,
        resolution: f64,
    },
    #[error("the picture cannot be written to {}: {why}", file.display())]
    Picture { file: PathBuf, why: io::Error },
    #[error("the result cannot be written: {0}")]
    Write(#[from] io::Error),
}

impl PlanError {
    fn exit(&self) -> Exit {
        match self {
            Self::WhichBank(_)
            | Self::NoSuchBank { .. }
            | Self::Alone
            | Self::LearnsOffsets(_)
            | Self::NeverLearns { .. } => Exit::Usage,
            // Whoever read our output has seen enough.
            Self::Write(e) if e.kind() == io::ErrorKind::BrokenPipe => Exit::Done,
            Self::Recording(_) | Self::TooShort(_) | Self::Picture { .. } | Self::Write(_) => {
                Exit::Failed
            }
        }
    }
}

/// Runs the command.
pub fn run(args: PlanArgs) -> Exit {
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

fn perform(args: &PlanArgs, settings: &Settings) -> Result<(), PlanError> {
    let at = which(args, settings)?;
    let bank = &*settings.banks[at];
    if bank.offsets == Offsets::Learn {
        return Err(PlanError::LearnsOffsets(bank.name.to_string()));
    }
    let assumed = assume(args, settings, at)?;
    if assumed.sources < 2 {
        return Err(PlanError::Alone);
    }
    let plan = simulate(bank, assumed)?;
    if let Some(file) = &args.picture {
        let picture = picture::draw(&plan);
        fs::write(file, picture).map_err(|why| PlanError::Picture {
            file: file.clone(),
            why,
        })?;
    }
    let text = if args.json {
        let mut line =
            serde_json::to_string(&body::PlanBody::of(&plan)).map_err(io::Error::from)?;
        line.push('\n');
        line
    } else {
        table::tell(&plan)
    };
    io::stdout().write_all(text.as_bytes())?;
    Ok(())
}

/// The place of the bank that is planned for.
fn which(args: &PlanArgs, settings: &Settings) -> Result<usize, PlanError> {
    let names: Vec<&str> = settings.banks.iter().map(|b| &*b.name).collect();
    match &args.bank {
        None if names.len() == 1 => Ok(0),
        None => Err(PlanError::WhichBank(names.join(", "))),
        Some(name) => {
            let found = names.iter().position(|n| n == name);
            found.ok_or_else(|| PlanError::NoSuchBank {
                name: name.clone(),
                known: names.join(", "),
            })
        }
    }
}

/// From the command line, or learnt from a recording.
fn assume(args: &PlanArgs, settings: &Settings, at: usize) -> Result<Assumed, PlanError> {
    let bank = &settings.banks[at];
    if let (Some(sd), Some(interval_us)) = (args.sd, args.cycle) {
        let (sources, from) = match &bank.sources {
            Sources::Listed(listed) => (listed.len(), "as given".to_owned()),
            Sources::Discover { most } => (
                usize::from(*most),
                format!("as given; sources as most_sources = {most} allows"),
            ),
        };
        return Ok(Assumed {
            sources,
            sd,
            own_sd: Vec::new(),
            phi: 0.0,
            interval_us,
            from,
        });
    }
    Ok(recorded::learn(args, settings, at)??)
}

fn simulate(bank: &Bank, assumed: Assumed) -> Result<Plan, PlanError> {
    let settings = Setting::all(bank);
    let scenes = Scene::all(&assumed, bank.margin, bank.spread_margin);
    let progress = progress(steps(&settings, &scenes));
    let judged = judge(&assumed, &settings, &scenes, &|| progress.inc(1));
    progress.finish_and_clear();
    let judged = judged.map_err(|_| PlanError::NeverLearns {
        sd: assumed.sd,
        unit: bank.characteristic.unit.to_string(),
        resolution: bank.characteristic.resolution.unwrap_or(0.0),
    })?;
    Ok(Plan {
        bank: bank.clone(),
        assumed,
        judged,
    })
}

/// On stderr, and only where somebody watches.
fn progress(steps: u64) -> ProgressBar {
    let bar = ProgressBar::new(steps);
    let style = ProgressStyle::with_template("{spinner} trying drifts {wide_bar} {pos}/{len}");
    if let Ok(style) = style {
        bar.set_style(style);
    }
    bar.enable_steady_tick(Duration::from_millis(100));
    bar
}
