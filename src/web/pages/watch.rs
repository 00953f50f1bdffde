//! The watch for people: whether it decides, how near each part is to a call, and how the budget became
//! its thresholds.

use maud::{Markup, html};

use crate::engine::{BankView, WatchView};
use crate::model::{Name, SourceIx};
use crate::verdict::watch::{Part, Progress, Reading};
use crate::web::format::{self, span_of_time};

/// The question.
const TITLE: &str = "How near is the watch to a call?";

/// The section; nothing where sources share no cycle, because the looks decide there.
pub fn section(view: &BankView) -> Markup {
    let Some(watch) = &view.watch else {
        return html! {};
    };
    html! {
        section id="watch" {
            h2 { (TITLE) }
            @match watch.progress {
                Progress::Watching => (watching(view, watch)),
                Progress::Learning { cycles, needed } => (learning(view, cycles, needed)),
                Progress::Still => p class="empty" {
                    "No source scatters at all, so there is nothing to compare a difference with. The looks decide. \
                     If the instrument rounds, state its resolution." },
                Progress::Alone => p class="empty" { "Fewer than two sources are left to compare." },
            }
        }
    }
}

fn learning(view: &BankView, cycles: u32, needed: u32) -> Markup {
    let left = i64::from(needed.saturating_sub(cycles));
    let ends = view.interval_us.map(|us| span_of_time(us * left));
    html! {
        p { "It is learning how much the sources scatter: " (cycles) " of " (needed) " cycles"
            @if let Some(ends) = ends { ", about " (ends) " to go" } "." }
        meter min="0" max=(needed) value=(cycles) { (cycles) " of " (needed) }
        p class="caption" { "Meanwhile the looks decide, with half the call budget: learning never silences." }
    }
}

fn watching(view: &BankView, watch: &WatchView) -> Markup {
    let cycles = watch.figures.account.as_ref();
    let cycles = cycles.map(|a| a.basis.cycles_per_false_call);
    html! {
        p class="caption" { "Every cycle is judged. A part calls when its statistic passes its threshold; all parts together \
            stay within " (view.bank.budget) " false calls"
            @if let Some(cycles) = cycles { ", which is one in " (format::count(cycles.round() as u64)) " cycles at this line's pace" } "." }
        div class="wide" tabindex="0" role="region" aria-label=(TITLE) {
            table class="watch" {
                thead { tr {
                    th scope="col" { "Part" } th scope="col" { "How near" } th scope="col" class="n" { "Statistic" }
                    th scope="col" class="n" { "Threshold" } th scope="col" { "Points to" }
                } }
                tbody { @for reading in &watch.readings { (row(view, reading)) } }
            }
        }
        (figures(view, watch))
    }
}

fn row(view: &BankView, reading: &Reading) -> Markup {
    let share = format!("{:.0} %", 100.0 * reading.ratio.clamp(0.0, 9.99));
    let leading = reading.leading.and_then(|s| name(view, s));
    html! {
        tr {
            th scope="row" { (words(reading.part)) }
            td { meter min="0" max="1" value=(format!("{:.3}", reading.ratio.clamp(0.0, 1.0))) { (share) } " " (share) }
            td class="n" { (format::plain(reading.statistic, 2)) }
            td class="n" { (format::plain(reading.threshold, 2)) }
            td { @match leading { Some(name) => (name), None => "–" } }
        }
    }
}

fn figures(view: &BankView, watch: &WatchView) -> Markup {
    let what = &view.bank.characteristic;
    let f = &watch.figures;
    html! {
        p class="facts" {
            @if let Some(sigma) = f.sigma { "Learnt: standard deviation " (what.mean(sigma)) " " (what.unit)
                @if f.from_resolution { " (what rounding alone makes)" }
                ", correlation of neighbouring cycles " (format::plain(f.phi, 2))
                @if f.phi_paid > 0.0 { ", of which " (format::plain(f.phi_paid, 2)) " is paid for" }
                "." }
        }
        @if let Some(account) = &f.account {
            details class="data" {
                summary { "From the call budget to the thresholds" }
                div class="wide" tabindex="0" role="region" aria-label="From the call budget to the thresholds" {
                    table {
                        thead { tr {
                            th scope="col" { "Part" } th scope="col" class="n" { "Share of the budget" }
                            th scope="col" class="n" { "Cycles to a false call" } th scope="col" { "Thresholds" } th scope="col" { "By" }
                        } }
                        tbody { @for entry in &account.parts { tr {
                            th scope="row" { (words(entry.part)) }
                            td class="n" { (format::plain(100.0 * entry.share, 0)) " %" }
                            td class="n" { (format::count(entry.cycles_per_false_call.round() as u64)) }
                            td { (thresholds(&entry.thresholds)) }
                            td { (entry.formula) }
                        } } }
                    }
                }
                p class="caption" { "Shares of the three level parts overlap, so they add up to more than their 80 %. \
                    The thresholds follow when sources join or leave, or the line's pace has changed by a fifth for an hour." }
            }
        }
    }
}

fn thresholds(of: &[(Option<usize>, f64)]) -> String {
    let one = |(span, value): &(Option<usize>, f64)| match span {
        Some(span) => format!("{} ({span} cycles)", format::plain(*value, 2)),
        None => format::plain(*value, 2),
    };
    of.iter().map(one).collect::<Vec<_>>().join(", ")
}

/// What a part looks for, in words.
pub fn words(part: Part) -> &'static str {
    match part {
        Part::Few => "a source off in level",
        Part::Split => "two groups off in level",
        Part::Pair => "two sources apart",
        Part::Erratic => "a source turned erratic",
        Part::Quiet => "a source gone quiet",
    }
}

fn name(view: &BankView, source: SourceIx) -> Option<Name> {
    let of = view.sources.iter().find(|s| s.source == source)?;
    Some(of.name.clone())
}
