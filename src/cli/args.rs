//! What each command can be told, in one place so that the same thing is called the same everywhere.
//!
//! Deliberately absent: what the commands do with it.

#[cfg(feature = "demo")]
use std::net::SocketAddr;
use std::path::PathBuf;
use std::time::Duration;

use clap::{Args, ValueEnum};

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
