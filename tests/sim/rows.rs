//! The table: every row of what the whole must show, as data.
//!
//! Short bounds are wide enough for chance at the short form's number of runs and narrow enough that a
//! watch whose thresholds, sums or names are wrong fails. Where what is solid is missed, the short bound
//! holds what is reached, so that it does not get worse unseen; the verdict says that it is missed. What
//! is solid is judged in the full form.

mod delays;
mod notices;
mod rates;

use super::table::{Asked, Bound, Form, Row};

/// Threshold of the standardised sum of 12 sources at 50 000 cycles to a false call (after Siegmund and
/// Venkatraman 1995).
const GLR_OF_12_AT_50_000: f64 = 5.25;

/// Spread without a margin, so that its part of the budget is spent too.
const NO_SPREAD_MARGIN: f64 = 1.0001;

/// The rows of a form.
pub fn rows(form: Form) -> Vec<Row> {
    let mut rows = Vec::new();
    rates::published(&mut rows);
    delays::delays(&mut rows);
    delays::delays_with_margin(&mut rows);
    delays::spread(&mut rows);
    rates::rates(form, &mut rows);
    rates::rare(&mut rows);
    rates::offsets(form, &mut rows);
    rates::learning(&mut rows);
    rates::unpaired(&mut rows);
    notices::names(&mut rows);
    notices::since(&mut rows);
    notices::clearing(&mut rows);
    notices::troubles(&mut rows);
    rows.retain(|row| row.runs(form) > 0);
    rows
}

fn asked(name: &'static str, short: Bound, solid: Bound, aim: Bound) -> Asked {
    Asked {
        name,
        short,
        solid,
        aim,
    }
}
