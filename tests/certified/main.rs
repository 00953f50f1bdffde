//! Every public statistic against an independent reference, in one table of allowed errors.
//!
//! `cargo test --test certified` prints one line per row and ends with `certified rows: N`. It fails
//! when an error grows beyond its entry, when an entry is more than ten times slacker than what is
//! measured, and when a public function of `evenrow::stats` has no entry.

mod coverage;
mod fixtures;
mod followups;
mod libraries;
mod maxima;
mod planning;
mod strd;
mod table;
mod tails;
mod worked;

use std::process::ExitCode;

fn main() -> ExitCode {
    let mut rows = Vec::new();
    strd::rows(&mut rows);
    tails::rows(&mut rows);
    maxima::rows(&mut rows);
    libraries::rows(&mut rows);
    worked::rows(&mut rows);
    followups::rows(&mut rows);
    planning::rows(&mut rows);
    let mut faults = Vec::new();
    println!("{}", table::HEADER);
    for row in &rows {
        println!("{row}");
        faults.extend(row.fault());
    }
    faults.extend(coverage::missing(&rows));
    for fault in &faults {
        println!("FAULT {fault}");
    }
    let (passed, failed) = (rows.len() - faults.len().min(rows.len()), faults.len());
    let outcome = if failed == 0 { "ok" } else { "FAILED" };
    println!(
        "\ntest result: {outcome}. {passed} passed; {failed} failed; 0 ignored; 0 measured; 0 filtered out"
    );
    println!("certified rows: {}", rows.len());
    if failed == 0 {
        ExitCode::SUCCESS
    } else {
        ExitCode::FAILURE
    }
}
