//! A handover on paper: one or two A4 pages, whole without scripts.

use jiff::tz::TimeZone;
use maud::{DOCTYPE, Markup, PreEscaped, html};

use crate::model::signed;
use crate::web::assets;
use crate::web::format::{self, Times, plain, span_of_time};

use super::picture::{Shows, draw};
use super::{BankPart, Handover, LevelFigures, LoadPart, NoticePart};

/// Names that fit below a picture.
const MOST_LABELS: usize = 24;

/// The handover as a file of its own.
pub fn whole(handover: &Handover) -> String {
    let title = format!("Handover · {} · {}", handover.shift, handover.plant);
    let page = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                title { (title) }
                meta name="viewport" content="width=device-width, initial-scale=1";
                style { (PreEscaped(assets::style())) }
            }
            body { main id="main" {
                (body(handover))
                p class="quiet" { "evenrow advises; a qualified person decides. It is no safety function, no interlock \
                    and no legal measuring instrument. Follow lock-out and the plant’s procedures before touching a machine." }
            } }
        }
    };
    page.into_string()
}

/// What a handover says, for a page.
pub fn body(handover: &Handover) -> Markup {
    let zone = TimeZone::get(&handover.zone).unwrap_or(TimeZone::UTC);
    let times = Times {
        zone,
        // Seen from the shift, its own day needs no date.
        now: handover.from,
    };
    let runs = handover.made < handover.to;
    html! {
        article class="handover" {
            header class="heading" { div {
                h1 { "Handover: " (handover.shift) ", " (handover.date) }
                p class="quiet" { (handover.plant) " · " (times.minute(handover.from)) " to " (times.minute(handover.to))
                    " (" (span_of_time(handover.to.us_since(handover.from))) ") · made " (times.minute(handover.made))
                    @if runs { " · " strong { "the shift still runs" } } }
            } }
            @if let Some(load) = &handover.load { (load_line(load)) }
            @for bank in &handover.banks { (bank_part(&times, bank)) }
            p class="quiet" { "Net-content rules are those of the local authority; figures on net content here are \
                information for the packer. They take values as normal, with the spread within the cycle; what moves \
                all sources together comes on top." }
        }
    }
}

fn load_line(load: &LoadPart) -> Markup {
    html! {
        p class="quiet" { "Notices of the plant: " (load.last_day) " in the last 24 h (published guidance: a person handles at most about "
            (load.most_a_day) " a day, one in ten minutes) · " (load.standing) " standing, " (load.stale) " of them for over 24 h · "
            (load.chattering) " chattering · "
            @if load.flood { strong { "flood: " (load.last_ten_minutes) " in ten minutes" } }
            @else { (load.last_ten_minutes) " in the last ten minutes" } }
    }
}

fn bank_part(times: &Times, bank: &BankPart) -> Markup {
    html! {
        section class="handed-bank" {
            h2 { (bank.bank) span class="quiet" { " " (bank.characteristic) } }
            @if bank.raised.is_empty() { p { "Nobody was called in this shift." } }
            @else {
                (notice_table(times, "Raised in this shift", &bank.raised))
                @if let Some(s) = bank.response_s {
                    p class="quiet" { "Acknowledged after " (span_of_time((s * 1e6) as i64)) " (median)." }
                }
            }
            @if !bank.carried.is_empty() { (notice_table(times, "From before", &bank.carried)) }
            (events(times, bank))
            (pictures(times, bank))
            @if let Some(level) = &bank.level { (level_line(bank, level)) }
            (quality(bank))
        }
    }
}

fn notice_table(times: &Times, title: &str, notices: &[NoticePart]) -> Markup {
    html! {
        table class="handed-table" {
            caption { (title) }
            thead { tr { th { "called" } th { "what" } th { "now" } th { "answered" } th { "what came of it" } } }
            tbody {
                @for notice in notices {
                    tr {
                        td { (times.short(notice.raised)) }
                        td { (notice.was) @for said in &notice.comments { br; span class="quiet" { (said) } } }
                        td { @if notice.open { strong { (notice.state) } } @else { "over" }
                            @if let Some(at) = notice.returned { " since " (times.short(at)) }
                            @if let Some(until) = notice.shelved_until { " until " (times.short(until)) } }
                        td { @match (&notice.by, notice.response_s) {
                            (Some(by), Some(s)) => { (by) ", " (span_of_time((s * 1e6) as i64)) },
                            _ => { "nobody yet" },
                        } }
                        td { (notice.outcome.as_deref().unwrap_or("not said")) }
                    }
                }
            }
        }
    }
}

fn events(times: &Times, bank: &BankPart) -> Markup {
    html! {
        @if !bank.events.is_empty() {
            ul class="handed-events" {
                @for event in &bank.events {
                    li { (times.short(event.at)) " " strong { (event.what) } span class="quiet" { " by " (event.by)
                        @if !event.reason.is_empty() { ": " (event.reason) } } }
                }
            }
        }
    }
}

fn pictures(times: &Times, bank: &BankPart) -> Markup {
    let unit = &bank.unit;
    let name = &bank.bank;
    let deviation = format!("Deviations of the sources of {name} from the others, in {unit}");
    let ratio = format!("Ratio of the standard deviations of the sources of {name} to the others'");
    html! {
        @match bank.looked {
            None => p class="empty" { "No look was kept in this shift, so there is no picture of the sources." },
            Some(at) => div class="handed-pictures" {
                figure { figcaption { "How far apart? (" (unit) ", 95 %, at " (times.short(at)) "; dashed: the margin to either side)" }
                    (draw(&bank.sources, Shows::Deviation, bank.margin, &deviation)) (labels(bank)) }
                figure { figcaption { "How steady? (sd against the others)" }
                    (draw(&bank.sources, Shows::Ratio, 1.5, &ratio)) (labels(bank)) }
            },
        }
        @let apart: Vec<String> = bank.sources.iter().filter(|s| s.named).filter_map(|s| {
            let [value, low, high] = s.deviation?;
            let figure = |x| signed(x, bank.places);
            Some(format!("{} {} {unit} ({} to {})", s.source, figure(value), figure(low), figure(high)))
        }).collect();
        @if !apart.is_empty() { p { "Named by the last look: " (apart.join("; ")) "." } }
    }
}

fn labels(bank: &BankPart) -> Markup {
    html! {
        @if bank.sources.len() <= MOST_LABELS {
            div class="handed-labels" { @for source in &bank.sources { span { (source.source) } } }
        } @else if let (Some(first), Some(last)) = (bank.sources.first(), bank.sources.last()) {
            div class="handed-ends" { span { (first.source) } span { (last.source) } }
        }
    }
}

fn level_line(bank: &BankPart, level: &LevelFigures) -> Markup {
    let unit = &bank.unit;
    let figure = |x: f64| format!("{} {unit}", plain(x, bank.places));
    let percent = |share: f64| format!("{} %", plain(share * 100.0, 2));
    html! {
        p { "Mean " (figure(level.mean))
            @if let Some(target) = level.target { ", target " (figure(target)) }
            @if let Some(declared) = level.declared { ", declared " (figure(declared)) } "."
            @if let Some(over) = level.over_declared { " Over declared: " (signed(over, bank.places)) " " (unit) " a pack"
                @if let Some(hour) = level.over_per_hour { ", about " (plain(hour, 0)) " " (unit) " an hour of production" }
                @if let Some(cost) = level.cost_per_hour { " (cost " (plain(cost, 2)) ")" } "." }
            @if let Some(share) = level.below_declared { " Expected below declared: " (percent(share)) " of packs"
                @if let (Some(worst), Some(share)) = (&level.worst, level.worst_share) { ", most from " (worst) " (" (percent(share)) ")" } "." }
            @if let (Some(error), Some(share)) = (level.tolerable, level.below_tolerable) {
                " Below declared less the tolerable error of 76/211/EEC (" (figure(error)) "): " (percent(share)) "." }
        }
    }
}

fn quality(bank: &BankPart) -> Markup {
    html! {
        p class="quiet" {
            @if let Some(all) = &bank.measurements {
                "Measurements since evenrow was started: "
                @if all.is_empty() { "none" }
                @for (i, (word, n)) in all.iter().enumerate() { @if i > 0 { ", " } (format::count(*n)) " " (word.replace('_', " ")) }
                ". "
            }
            @if !bank.silent.is_empty() { strong { "Silent now: " (bank.silent.join(", ")) } ". " }
            @if let Some(budget) = &bank.budget { "Call budget: " (budget.words) " (" (budget.nothing_found) " of " (budget.told)
                " told came to nothing, " (plain(budget.allowed, 2)) " allowed in " (plain(budget.days, 0)) " days; nobody said of "
                (budget.calls.saturating_sub(budget.told)) ")." }
        }
    }
}
