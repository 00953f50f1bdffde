//! The proof by simulation, short form: `cargo test --test sim [row-filter]`.
//!
//! Prints the table of what the watch and the looks show on simulated plants beside what is asked, and
//! fails where a figure leaves its short bound. `cargo bench --bench sim` is the full form.

#[path = "mod.rs"]
mod sim;

use std::process::ExitCode;

use sim::crew::Crew;
use sim::rows::rows;
use sim::table::{Form, HEADER};

fn main() -> ExitCode {
    let filter: Vec<String> = std::env::args()
        .skip(1)
        .filter(|a| !a.starts_with('-'))
        .collect();
    let wanted = |text: &str| filter.is_empty() || filter.iter().any(|f| text.contains(f.as_str()));
    let crew = Crew { tick: &|| () };
    let (mut passed, mut failed) = (0, 0);
    println!("{HEADER}");
    for row in rows(Form::Short) {
        if !wanted(&format!("{} | {}", row.what, row.case)) {
            continue;
        }
        for judged in row.judge(Form::Short, &crew) {
            println!("{judged}");
            if judged.fails() {
                failed += 1;
            } else {
                passed += 1;
            }
        }
    }
    let outcome = if failed == 0 { "ok" } else { "FAILED" };
    println!(
        "\ntest result: {outcome}. {passed} passed; {failed} failed; 0 ignored; 0 measured; 0 filtered out"
    );
    if failed == 0 {
        ExitCode::SUCCESS
    } else {
        ExitCode::FAILURE
    }
}
