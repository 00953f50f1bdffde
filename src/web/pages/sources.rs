//! Tables of what a bank's sources deliver, and of what was refused.

use maud::{Markup, html};

use crate::engine::{BankView, RefusalView};
use crate::web::{address, format};

use super::frame::Scene;

/// The sources.
pub fn table(scene: &Scene<'_>, view: &BankView) -> Markup {
    let what = &view.bank.characteristic;
    let unit = &view.bank.characteristic.unit;
    html! {
        div class="wide" tabindex="0" role="region" aria-label="Sources" {
            table {
                thead { tr {
                    th scope="col" { "Source" } th scope="col" { "State" } th scope="col" class="n" { "Values" }
                    th scope="col" class="n" { "Last value, " (unit) } th scope="col" { "Taken" }
                    th scope="col" { "Named" }
                } }
                tbody {
                    @for source in &view.sources {
                        tr class=[(!source.named.is_empty()).then_some("apart")] {
                            th scope="row" { a href=(address::source(&view.bank.name, &source.name)) { (source.name) } }
                            td { (source.state.word()) }
                            td class="n" { (format::count(source.values as u64)) }
                            td class="n" { @if let Some(x) = source.last_value { (what.value(x)) } @else { "–" } }
                            td { @match source.last_taken {
                                Some(at) => (scene.time(at, &scene.times.second(at))),
                                None => "–",
                            } }
                            td { (source.named.iter().map(|k| k.words()).collect::<Vec<_>>().join(", ")) }
                        }
                    }
                }
            }
        }
    }
}

/// Refusals, the last of each kind.
pub fn refusal_table(scene: &Scene<'_>, refusals: &[RefusalView]) -> Markup {
    html! {
        div class="wide" tabindex="0" role="region" aria-label="Refusals by reason" {
            table {
                thead { tr {
                    th scope="col" { "Reason" } th scope="col" class="n" { "Count" } th scope="col" { "Last" }
                    th scope="col" { "What was wrong" } th scope="col" { "Topic" } th scope="col" { "Payload" }
                } }
                tbody {
                    @for refusal in refusals {
                        tr {
                            th scope="row" { (refusal.reason.word().replace('_', " ")) }
                            td class="n" { (format::count(refusal.count)) }
                            td { (scene.time(refusal.at, &scene.times.second(refusal.at))) }
                            td { (refusal.last.detail) }
                            td { code { (refusal.last.topic) } }
                            td { code class="payload" { (refusal.last.excerpt) } }
                        }
                    }
                }
            }
        }
    }
}

/// What became of the measurements since the start.
pub fn outcomes(view: &BankView) -> Markup {
    html! {
        dl class="counts" {
            @for (outcome, count) in &view.outcomes {
                div { dt { (outcome.replace('_', " ")) } dd { (format::count(*count)) } }
            }
            @if let Some(cycles) = view.cycles {
                div { dt { "cycles closed" } dd { (format::count(cycles.closed)) } }
                div { dt { "cycles skipped" } dd { (format::count(cycles.skipped)) } }
                div { dt { "cycles open" } dd { (format::count(cycles.open)) } }
            }
        }
    }
}
