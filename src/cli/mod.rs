//! The commands: what they are told ([`args`]), how they end ([`exit`]), and one file for each.
//!
//! A command prints what it has to say and returns an [`Exit`]; only [`main`] turns that into a code.

pub mod args;
mod ask;
pub mod configuration;
pub mod demo;
pub mod exit;
mod explain;
mod handover;
pub mod log;
pub mod plan;
pub mod rehearse;
mod send_test;
pub mod signals;
mod vet;
mod watch;

use std::process::ExitCode;

use clap::{Parser, Subcommand};

use exit::Exit;

/// Watches the parallel sources of one operation and names the ones that drift apart.
#[derive(Parser, Debug)]
#[command(name = "evenrow", version, arg_required_else_help = true)]
struct Cli {
    #[command(subcommand)]
    command: Command,
}

/// One line for each command: its options from [`args`], its body in a file of its name.
#[derive(Subcommand, Debug)]
enum Command {
    /// Watch the plant: take measurements in, look at every bank, raise notices, serve pages
    Watch(args::WatchArgs),
    /// The whole thing on one machine: a broker inside, a simulated line, a page to look at
    #[cfg(feature = "demo")]
    Demo(args::DemoArgs),
    /// Recorded measurements through the same engine, as fast as it goes
    Rehearse(args::RehearseArgs),
    /// A look and a call taken apart so that they can be repeated by hand
    Explain(args::ExplainArgs),
    /// Before trusting a setting: what drift is found, how surely and how soon
    Plan(args::PlanArgs),
    /// What one shift leaves to the next: calls, answers, line events, figures; HTML to print, or JSON
    Handover(args::HandoverArgs),
    /// Check a configuration: every fault at once, with its line and what to do
    Vet(args::VetArgs),
}

/// Reads the command line, runs the command and says how it ended.
pub fn main() -> ExitCode {
    match Cli::try_parse() {
        Ok(cli) => run(cli).into(),
        Err(error) => unread(&error).into(),
    }
}

/// Runs the command.
fn run(cli: Cli) -> Exit {
    match cli.command {
        Command::Watch(args) => watch::run(args),
        #[cfg(feature = "demo")]
        Command::Demo(args) => demo::run(args),
        Command::Rehearse(args) => rehearse::run(args),
        Command::Explain(args) => explain::run(args),
        Command::Plan(args) => plan::run(args),
        Command::Handover(args) => handover::run(args),
        Command::Vet(args) => vet::run(args),
    }
}

/// Prints help, version or what is wrong with the command line.
fn unread(error: &clap::Error) -> Exit {
    // Help that was asked for goes to stdout and is no failure.
    let asked_for = !error.use_stderr();
    match error.print() {
        Ok(()) if asked_for => Exit::Done,
        Ok(()) => Exit::Usage,
        Err(_) => Exit::Failed,
    }
}
