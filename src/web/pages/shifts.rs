//! What gathers of the day, where the sources are shifts. It is shown and decides nothing.

use maud::{Markup, html};

use crate::engine::BankView;
use crate::web::format;

use super::frame::Scene;

/// The running shifts; nothing for other banks.
pub fn section(scene: &Scene<'_>, view: &BankView) -> Markup {
    let Some(shifts) = &view.shifts else {
        return html! {};
    };
    let what = &view.bank.characteristic;
    html! {
        section {
            h2 { "What has the running shift made so far?" }
            p class="caption" { "The mean becomes the one value of the shift for this day, ten minutes after its end, if it rests on at least "
                (shifts.fewest) " values. Until then it decides nothing." }
            @if shifts.running.is_empty() { p class="empty" { "No shift has delivered anything since the last one ended." } }
            @else {
                div class="wide" tabindex="0" role="region" aria-label="Running shifts" {
                    table {
                        thead { tr {
                            th scope="col" { "Shift" } th scope="col" { "Ends" } th scope="col" class="n" { "Values" }
                            th scope="col" class="n" { "Mean so far, " (what.unit) }
                        } }
                        tbody {
                            @for shift in &shifts.running {
                                tr {
                                    th scope="row" { (shift.name) }
                                    td { (scene.time(shift.end, &scene.times.second(shift.end))) }
                                    td class="n" { (format::count(shift.count)) }
                                    td class="n" { (what.mean(shift.mean)) }
                                }
                            }
                        }
                    }
                }
            }
            @if shifts.skipped > 0 { p { (format::count(shifts.skipped)) " had too few values and did not enter." } }
        }
    }
}
