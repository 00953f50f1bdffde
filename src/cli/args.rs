//! What each command can be told, in one place so that the same thing is called the same everywhere.
//!
//! Deliberately absent: what the commands do with it.

#[cfg(feature = "demo")]
use std::net::SocketAddr;
use std::path::PathBuf;
use std::time::Duration;

use clap::{ArgGroup, Args, ValueEnum};

use crate::model::Time;

use crate::settings::duration_from_words;

/// Options of `evenrow watch`.
#[derive(Args, Clone, Debug)]
pub struct WatchArgs {
    /// The configuration (TOML)
    #[arg(long, value_name = "FILE")]
    pub config: PathBuf,
    /// How log lines are written to stderr
    #[arg(long, value_name = "FORM", value_enum, default_value_t = LogForm::Text)]
    pub log: LogForm,
}

/// How log lines are written.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum LogForm {
    /// One JSON object per line
    Json,
    /// One line of text each
    Text,
}

/// Options of `evenrow vet`.
#[derive(Args, Clone, Debug)]
pub struct VetArgs {
    /// The configuration (TOML)
    #[arg(long, value_name = "FILE")]
    pub config: PathBuf,
    /// Send one notice that is marked as a test by every way out, and say what became of each
    #[arg(long)]
    pub send_test: bool,
    /// Also connect to the broker and listen for a while, without writing anything there: what matches,
    /// what would be refused, and a bank proposed from what was heard
    #[arg(long)]
    pub broker: bool,
    /// How long to listen
    #[arg(long, value_name = "DURATION", default_value = "30s", requires = "broker", value_parser = listening)]
    pub listen: Duration,
    /// One JSON object instead of text
    #[arg(long, requires = "broker")]
    pub json: bool,
}

/// A time to listen is between a second and a day.
fn listening(text: &str) -> Result<Duration, String> {
    let us = duration_from_words(text).and_then(|us| u64::try_from(us).ok());
    match us {
        Some(us) if (1_000_000..=86_400_000_000).contains(&us) => Ok(Duration::from_micros(us)),
        _ => Err("a time to listen is a number with its unit, for example 30s or 5min".to_owned()),
    }
}

/// Options of `evenrow handover`.
#[derive(Args, Clone, Debug)]
pub struct HandoverArgs {
    /// The configuration (TOML)
    #[arg(long, value_name = "FILE")]
    pub config: PathBuf,
    /// The shift; without it the whole day where a date is given, else the newest shift
    #[arg(long, value_name = "NAME")]
    pub shift: Option<String>,
    /// The day on which it began, as 2026-03-29
    #[arg(long, value_name = "DATE")]
    pub date: Option<String>,
    /// Write JSON instead of HTML
    #[arg(long)]
    pub json: bool,
    /// The file whose token asks the running daemon; without it the configured one
    #[arg(long, value_name = "FILE")]
    pub token_file: Option<PathBuf>,
    /// Show the tolerable negative error of a rule beside the declared quantity
    #[arg(long, value_name = "RULE", value_enum)]
    pub tolerable: Option<TolerableError>,
}

/// Rules whose tolerable errors can be shown.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum TolerableError {
    /// Directive 76/211/EEC, annex I
    #[value(name = "76/211/EEC")]
    Eec76211,
}

/// Options of `evenrow rehearse`.
#[derive(Args, Clone, Debug)]
pub struct RehearseArgs {
    /// The configuration (TOML); its broker, store and port are not touched
    #[arg(long, value_name = "FILE")]
    pub config: PathBuf,
    /// The bank that the recordings belong to; needed when there are several banks and the recordings do
    /// not name them
    #[arg(long, value_name = "NAME")]
    pub bank: Option<String>,
    /// Write one JSON object per line (type look, notice, summary) instead of a table
    #[arg(long)]
    pub json: bool,
    /// End with code 3 when a notice was raised
    #[arg(long)]
    pub fail_on_notice: bool,
    /// The column with the time taken, instead of the configured one
    #[arg(long, value_name = "COLUMN")]
    pub time_column: Option<String>,
    /// The column with the source, instead of the configured one
    #[arg(long, value_name = "COLUMN")]
    pub source_column: Option<String>,
    /// The column with the value, instead of the configured one
    #[arg(long, value_name = "COLUMN")]
    pub value_column: Option<String>,
    /// The column with the cycle, instead of the configured one
    #[arg(long, value_name = "COLUMN")]
    pub cycle_column: Option<String>,
    /// Recordings in the order in which they were made; - for standard input
    #[arg(required = true, value_name = "RECORDING")]
    pub recordings: Vec<PathBuf>,
}

/// Options of `evenrow explain`.
#[derive(Args, Clone, Debug)]
pub struct ExplainArgs {
    /// The configuration (TOML); the daemon that runs with it is asked, else its store is read
    #[arg(long, value_name = "FILE")]
    pub config: PathBuf,
    /// The bank
    pub bank: String,
    /// The newest call (else look) at or before this time, for example 2026-03-01T06:00:00Z; the newest
    /// call when it is missing
    #[arg(long, value_name = "TIME", value_parser = moment, conflicts_with = "notice")]
    pub at: Option<Time>,
    /// The call that raised this notice
    #[arg(long, value_name = "ID")]
    pub notice: Option<String>,
    /// Also write the values of the windows into this file
    #[arg(long, value_name = "FILE")]
    pub csv: Option<PathBuf>,
    /// A token of the daemon, where it asks for one to look
    #[arg(long, value_name = "FILE")]
    pub token_file: Option<PathBuf>,
    /// Write one JSON object instead of text
    #[arg(long)]
    pub json: bool,
}

/// A time in RFC 3339.
fn moment(text: &str) -> Result<Time, String> {
    Time::parse_rfc3339(text)
        .map_err(|e| format!("it must be a time like 2026-03-01T06:00:00Z: {e}"))
}

/// Options of `evenrow plan`.
#[derive(Args, Clone, Debug)]
#[command(group(ArgGroup::new("noise").required(true).args(["sd", "recording"])))]
pub struct PlanArgs {
    /// The configuration (TOML); its broker, store and port are not touched
    #[arg(long, value_name = "FILE")]
    pub config: PathBuf,
    /// The bank to plan for; needed when there are several
    #[arg(long, value_name = "NAME")]
    pub bank: Option<String>,
    /// Standard deviation of single values within a source, in the bank's unit
    #[arg(long, value_name = "X", requires = "cycle", value_parser = above_zero)]
    pub sd: Option<f64>,
    /// Time between the values of a source, for example 4s or 500ms
    #[arg(long, value_name = "DURATION", requires = "sd", value_parser = interval_us)]
    pub cycle: Option<i64>,
    /// Learn the standard deviation, the correlation of neighbours and the time between values from this
    /// recording instead
    #[arg(long, value_name = "FILE", conflicts_with_all = ["sd", "cycle"])]
    pub recording: Option<PathBuf>,
    /// Also draw "How soon is a drift found?" into this file
    #[arg(long, value_name = "FILE.svg")]
    pub picture: Option<PathBuf>,
    /// Write one JSON object instead of tables
    #[arg(long)]
    pub json: bool,
}

/// A size is a plain number above zero.
fn above_zero(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(size) if size.is_finite() && size > 0.0 => Ok(size),
        _ => Err("it must be a number above 0, for example 1.2".to_owned()),
    }
}

/// A length of time above zero, in microseconds.
fn interval_us(text: &str) -> Result<i64, String> {
    let read = duration_from_words(text).filter(|us| *us > 0);
    read.ok_or_else(|| "it must be a time with its unit, for example 4s or 500ms".to_owned())
}

/// Options of `evenrow demo`.
#[cfg(feature = "demo")]
#[derive(Args, Clone, Debug)]
pub struct DemoArgs {
    /// How many times faster than in life the line runs
    #[arg(long, value_name = "N", default_value_t = 1.0, value_parser = speed)]
    pub speed: f64,
    /// Address and port of the page; port 0 takes a free one
    #[arg(long, value_name = "ADDR", default_value = "127.0.0.1:0")]
    pub listen: SocketAddr,
    /// Keep the store in this folder; otherwise in a temporary one that is removed at the end
    #[arg(long, value_name = "DIR")]
    pub folder: Option<PathBuf>,
}

/// A speed is a plain number above zero.
#[cfg(feature = "demo")]
fn speed(text: &str) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(speed) if speed.is_finite() && speed > 0.0 => Ok(speed),
        _ => Err("a speed is a number above 0, for example 4".to_owned()),
    }
}
