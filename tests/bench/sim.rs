//! The proof by simulation, full form.
//!
//!   cargo bench --bench sim [ROW-FILTER]
//!
//! Prints the table in Markdown, as it stands in DEVELOPERS.md; a bar on standard error shows the runs.
//! Only rows whose first two columns contain the filter are run. Takes hours without one.

#[path = "../sim/mod.rs"]
mod sim;

use std::process::ExitCode;
use std::time::Instant;

use indicatif::{ProgressBar, ProgressStyle};
use sim::crew::Crew;
use sim::rows::rows;
use sim::table::{Form, HEADER};

fn main() -> ExitCode {
    let filter: Vec<String> = std::env::args()
        .skip(1)
        .filter(|a| !a.starts_with('-'))
        .collect();
    let wanted = |text: &str| filter.is_empty() || filter.iter().any(|f| text.contains(f.as_str()));
    let mut rows = rows(Form::Full);
    rows.retain(|row| wanted(&format!("{} | {}", row.what, row.case)));
    let runs: usize = rows.iter().map(|row| row.runs(Form::Full)).sum();
    let style = ProgressStyle::with_template("{bar:40} {pos} of {len} runs, {eta} to go: {msg}");
    let bar = ProgressBar::new(runs as u64).with_style(style.expect("a template that holds"));
    let crew = Crew {
        tick: &|| bar.inc(1),
    };
    let started = Instant::now();
    let mut failed = 0;
    println!("{HEADER}");
    for row in rows {
        bar.set_message(format!("{}, {}", row.what, row.case));
        for judged in row.judge(Form::Full, &crew) {
            bar.suspend(|| println!("{judged}"));
            failed += usize::from(judged.fails());
        }
    }
    bar.finish_and_clear();
    let minutes = started.elapsed().as_secs_f64() / 60.0;
    println!(
        "\n{failed} figures miss what is solid by more than two standard errors; {minutes:.1} minutes."
    );
    if failed == 0 {
        ExitCode::SUCCESS
    } else {
        ExitCode::FAILURE
    }
}
