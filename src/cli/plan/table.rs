//! The plan as tables for people.

use std::fmt::Write as _;

use comfy_table::{CellAlignment, Table, presets};

use crate::settings::duration_words;
use crate::verdict::Shares;

use super::Plan;
use super::outcome::{Figure, Outcome, Worth};
use super::setting::Variation;
use super::work::{Judged, Tried};

/// Everything, as text.
pub fn tell(plan: &Plan) -> String {
    let mut parts = vec![head(plan)];
    for judged in &plan.judged {
        if judged.setting.variation == Variation::AsConfigured {
            parts.push(configured(plan, judged));
        }
    }
    if let Some(others) = others(plan) {
        parts.push(others);
    }
    parts.push(notes(plan));
    parts.join("\n\n") + "\n"
}

/// What was assumed and what the budget comes to.
fn head(plan: &Plan) -> String {
    let (bank, assumed) = (&plan.bank, &plan.assumed);
    let (what, unit) = (&bank.characteristic, &bank.characteristic.unit);
    let mut text = format!(
        "{}: {} sources, margin {} {unit}, spread margin {}, false calls {}\n",
        bank.name, assumed.sources, bank.margin, bank.spread_margin, bank.budget
    );
    let _ = write!(
        text,
        "Assumed ({}): sd {} {unit} within a source, one value every {}, correlation of neighbours {:.2}",
        assumed.from,
        what.mean(assumed.sd),
        duration_words(assumed.interval_us),
        assumed.phi
    );
    if !assumed.own_sd.is_empty() {
        let low = assumed.own_sd.iter().copied().fold(f64::INFINITY, f64::min);
        let high = assumed.own_sd.iter().copied().fold(0.0, f64::max);
        let _ = write!(
            text,
            "; sources differ, {} to {} {unit}",
            what.mean(low),
            what.mean(high)
        );
    }
    let cycles = plan.judged.first().and_then(|j| j.cycles_per_false_call);
    let _ = match cycles {
        Some(cycles) => write!(
            text,
            "\nThe budget allows one false call in {cycles:.0} cycles; the watch decides at each cycle."
        ),
        None => {
            let shares = Shares::overlapping(bank, assumed.sources, assumed.interval_us);
            write!(
                text,
                "\nSources share no cycle: looks decide, every {}, each at a level of {:.1e}.",
                duration_words(bank.look_every_us),
                shares.level
            )
        }
    };
    text
}

fn configured(plan: &Plan, judged: &Judged) -> String {
    let mut table = table(&[
        "what happens",
        "that is",
        "10 min",
        "1 h",
        "8 h",
        "half within",
        "9 in 10 within",
    ]);
    for Tried { scene, outcome } in &judged.tried {
        let mut row = vec![scene.words(&plan.bank.characteristic), scene.beyond_words()];
        row.extend(match outcome {
            Some(outcome) => figures(outcome),
            None => vec!["–".to_owned(); 5],
        });
        table.add_row(row);
    }
    align_right(&mut table, 2..7);
    format!("As configured: called within …, and the time to a call\n{table}")
}

fn figures(outcome: &Outcome) -> Vec<String> {
    let mark = match outcome.worth {
        Worth::Estimate => "",
        Worth::Bound => "≥ ",
    };
    let shares = outcome.within.iter();
    let mut cells: Vec<String> = shares.map(|f| format!("{mark}{}", percent(f))).collect();
    cells.push(time(outcome, outcome.median_us.as_ref()));
    cells.push(time(outcome, outcome.ninety_us.as_ref()));
    cells
}

/// The times under the other settings, side by side.
fn others(plan: &Plan) -> Option<String> {
    let others: Vec<&Judged> = plan
        .judged
        .iter()
        .filter(|j| j.setting.variation != Variation::AsConfigured)
        .collect();
    let first = others.first()?;
    let mut header = vec!["what happens".to_owned()];
    header.extend(others.iter().map(|j| j.setting.words()));
    let names: Vec<&str> = header.iter().map(String::as_str).collect();
    let mut table = table(&names);
    for (row, Tried { scene, .. }) in first.tried.iter().enumerate() {
        let mut cells = vec![scene.words(&plan.bank.characteristic)];
        for judged in &others {
            cells.push(match &judged.tried[row].outcome {
                Some(outcome) => format!(
                    "{}; {}",
                    time(outcome, outcome.median_us.as_ref()),
                    time(outcome, outcome.ninety_us.as_ref())
                ),
                None => "no difference".to_owned(),
            });
        }
        table.add_row(cells);
    }
    align_right(&mut table, 1..names.len());
    Some(format!(
        "With other settings: half within; 9 in 10 within\n{table}"
    ))
}

fn notes(plan: &Plan) -> String {
    let tried = plan.judged.iter().flat_map(|j| &j.tried);
    let outcomes: Vec<&Outcome> = tried.filter_map(|t| t.outcome.as_ref()).collect();
    let trials = outcomes.iter().map(|o| o.trials).min().unwrap_or(0);
    let largest = outcomes.iter().flat_map(|o| o.within.iter());
    let largest = largest.map(|f| f.error).fold(0.0, f64::max);
    let relative = |f: &Option<Figure>| f.filter(|f| f.value > 0.0).map(|f| f.error / f.value);
    let of_median = outcomes.iter().filter_map(|o| relative(&o.median_us));
    let of_median = of_median.fold(0.0, f64::max);
    let mut text = format!(
        "{trials} or more trials of each, always the same ones; standard error of a percentage at most {:.0} %, of a \
         time to half of the calls at most {:.0} %.",
        (100.0 * largest).ceil(),
        (100.0 * of_median).ceil()
    );
    let bound = outcomes.iter().any(|o| o.worth == Worth::Bound);
    if bound {
        text.push_str(
            "\nLooks are counted once a window holds nothing from before: calls come at least as surely and as \
             soon.\nWhat moves all sources together is not in these figures: without pairing it hides a drift. If \
             sources share cycles, say so (`pairing`).",
        );
    }
    text.push_str(
        "\nA call says that something differs; names and sizes get surer as values arrive.",
    );
    text
}

/// A time rounded to what it is worth ("2 min 10 s").
fn time(outcome: &Outcome, figure: Option<&Figure>) -> String {
    let mark = match outcome.worth {
        Worth::Estimate => "",
        Worth::Bound => "≤ ",
    };
    figure.map_or_else(
        || "later".to_owned(),
        |f| format!("{mark}{}", time_words(f.value)),
    )
}

/// A length of time in two significant figures or so.
pub fn time_words(us: f64) -> String {
    let s = us / 1e6;
    if s < 9.95 {
        format!("{s:.1} s")
    } else if s < 119.5 {
        format!("{s:.0} s")
    } else if s < 570.0 {
        format!("{:.1} min", s / 60.0)
    } else if s < 7170.0 {
        format!("{:.0} min", s / 60.0)
    } else if s < 171_000.0 {
        format!("{:.1} h", s / 3600.0)
    } else {
        format!("{:.1} d", s / 86_400.0)
    }
}

fn percent(figure: &Figure) -> String {
    format!("{:.0} %", 100.0 * figure.value)
}

fn table(header: &[&str]) -> Table {
    let mut table = Table::new();
    table.load_preset(presets::UTF8_BORDERS_ONLY);
    table.set_header(header);
    table
}

fn align_right(table: &mut Table, columns: std::ops::Range<usize>) {
    for column in columns {
        if let Some(column) = table.column_mut(column) {
            column.set_cell_alignment(CellAlignment::Right);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn times_are_said_as_people_say_them() {
        for (s, words) in [
            (0.4, "0.4 s"),
            (42.0, "42 s"),
            (133.0, "2.2 min"),
            (1200.0, "20 min"),
            (9000.0, "2.5 h"),
            (200_000.0, "2.3 d"),
        ] {
            assert_eq!(time_words(s * 1e6), words);
        }
    }
}
