//! A look for people: its two pictures, its tests and what to mind.

use std::sync::Arc;

use maud::{Markup, html};

use crate::engine::BankView;
use crate::notice::Kind;
use crate::verdict::{Estimate, Finding, Look, Method, TestEntry};
use crate::web::format::{self, Digits};
use crate::web::pictures::{deviations, row, spread};
use crate::web::signin::percent;

use super::frame::Scene;

/// The look that the pictures show: the span asked for; else that of the newest active notice of this
/// kind; else the shortest that found the bank apart; else the longest that could say anything.
pub fn chosen(view: &BankView, asked: Option<usize>, kind: Kind) -> Option<&Arc<Look>> {
    let of_span = |span: usize| view.looks.iter().find(|l| l.span == span);
    let apart = match kind {
        Kind::SpreadApart => Finding::SpreadApart,
        _ => Finding::LevelApart,
    };
    let notices = view
        .open
        .iter()
        .filter(|n| n.kind == kind && n.state.is_active());
    asked
        .and_then(of_span)
        .or_else(|| notices.map(|n| n.span).find_map(of_span))
        .or_else(|| view.looks.iter().find(|l| l.finding == apart))
        .or_else(|| view.looks.iter().rev().find(|l| says_something(l)))
        .or_else(|| view.looks.first())
}

fn says_something(look: &Look) -> bool {
    !matches!(
        look.finding,
        Finding::NotEnoughData | Finding::DependentData
    )
}

/// The spans as links, the shown one marked.
pub fn span_links(view: &BankView, shown: usize, anchor: &str) -> Markup {
    html! {
        @if view.looks.len() > 1 {
            p class="spans" {
                "Over the newest "
                @for look in &view.looks {
                    a href={ "/banks/" (percent(&view.bank.name)) "?span=" (look.span) "#" (anchor) }
                        aria-current=[(look.span == shown).then_some("true")] { (look.span) }
                    " "
                }
                "values of each source"
            }
        }
    }
}

/// The picture of levels with its table.
pub fn level_picture(view: &BankView, look: &Look) -> Markup {
    let unit = &view.bank.characteristic.unit;
    html! {
        section id="level" class="picture" {
            h2 { (deviations::TITLE) }
            (span_links(view, look.span, "level"))
            @match deviations::draw(&view.bank, look) {
                Some(picture) => {
                    div class="frame" { (picture) }
                    (row::key((view.bank.margin > 0.0).then(|| format!("the margin, {} {unit} wide", view.bank.margin))))
                    p class="caption" { "Deviation from the mean of the even set without the source itself, in " (unit)
                        ". The band holds as many sources as it can: whoever stands outside is more than the margin \
                          from somebody inside." }
                    (level_table(view, look))
                }
                None => (nothing(look)),
            }
        }
    }
}

fn nothing(look: &Look) -> Markup {
    html! {
        p class="empty" { "Nothing to draw yet: " (look.finding.words())
            @if !look.remark.is_empty() { ". " (super::frame::sentence(&look.remark)) } }
    }
}

fn level_table(view: &BankView, look: &Look) -> Markup {
    let digits = Digits::of(&view.bank);
    let unit = &view.bank.characteristic.unit;
    let ends = |e: Option<Estimate>, pick: fn(Estimate) -> f64| {
        e.map_or_else(|| "–".to_owned(), |e| digits.deviation(pick(e)))
    };
    html! {
        details class="data" {
            summary { "The same as a table" }
            div class="wide" tabindex="0" role="region" aria-label="Deviations" {
                table {
                    thead { tr {
                        th scope="col" { "Source" } th scope="col" class="n" { "Values" }
                        th scope="col" class="n" { "Mean, " (unit) } th scope="col" class="n" { "Deviation, " (unit) }
                        th scope="col" class="n" { "From" } th scope="col" class="n" { "To" } th scope="col" { "Stands" }
                    } }
                    tbody { @for s in &look.sources { tr class=[s.named_level.then_some("apart")] {
                        th scope="row" { (s.name) } td class="n" { (s.n) } td class="n" { (digits.mean(s.mean)) }
                        td class="n" { (ends(s.deviation, |e| e.value)) } td class="n" { (ends(s.deviation, |e| e.low)) }
                        td class="n" { (ends(s.deviation, |e| e.high)) }
                        td { @if s.named_level { "apart, " (deviations::word(s.deviation)) } }
                    } } }
                }
            }
        }
    }
}

/// The picture of spreads with its table.
pub fn spread_picture(view: &BankView, look: &Look) -> Markup {
    html! {
        section id="spread" class="picture" {
            h2 { (spread::TITLE) }
            (span_links(view, look.span, "spread"))
            @match spread::draw(&view.bank, look) {
                Some(picture) => {
                    div class="frame" { (picture) }
                    (row::key(Some(format!("the spread margin, a factor of {}", view.bank.spread_margin))))
                    p class="caption" { "Standard deviation as a ratio to that of the others: 2× scatters twice as much." }
                    (spread_table(view, look))
                }
                None => (nothing(look)),
            }
        }
    }
}

fn spread_table(view: &BankView, look: &Look) -> Markup {
    let digits = Digits::of(&view.bank);
    let unit = &view.bank.characteristic.unit;
    html! {
        details class="data" {
            summary { "The same as a table" }
            div class="wide" tabindex="0" role="region" aria-label="Spreads" {
                table {
                    thead { tr {
                        th scope="col" { "Source" } th scope="col" class="n" { "Values" }
                        th scope="col" class="n" { "Standard deviation, " (unit) }
                        th scope="col" class="n" { "Ratio (interval)" } th scope="col" { "Stands" }
                    } }
                    tbody { @for s in &look.sources { tr class=[s.named_spread.then_some("apart")] {
                        th scope="row" { (s.name) } td class="n" { (s.n) } td class="n" { (digits.mean(s.sd)) }
                        td class="n" { @match s.sd_ratio { Some(r) => (spread::ratio_words(r)), None => "–" } }
                        td { @if s.named_spread { "apart, " (spread::word(s.sd_ratio)) } }
                    } } }
                }
            }
        }
    }
}

/// The newest looks, one table of tests per span.
pub fn tests(scene: &Scene<'_>, view: &BankView, shown: usize) -> Markup {
    html! {
        section id="look" {
            h2 { "What did the last looks say?" }
            p class="caption" { "Each span is judged on its own share of the call budget (" (view.bank.budget)
                "); a look calls when the deciding test passes its alpha and the difference is surely beyond the margin." }
            @for look in &view.looks {
                details class="look" open[look.span == shown] {
                    summary {
                        span { (look.span) " values" } " " strong { (look.finding.words()) } " "
                        (scene.time(look.at, &scene.times.second(look.at)))
                    }
                    (one(view, look))
                }
            }
        }
    }
}

fn one(view: &BankView, look: &Look) -> Markup {
    let digits = Digits::of(&view.bank);
    html! {
        @if !look.remark.is_empty() { p class="remark" { (super::frame::sentence(&look.remark)) } }
        @if !look.tests.is_empty() {
            div class="wide" tabindex="0" role="region" aria-label={ "Tests over " (look.span) " values" } {
                table class="tests" {
                    thead { tr {
                        th scope="col" { "Test" } th scope="col" { "On" } th scope="col" class="n" { "Statistic" }
                        th scope="col" class="n" { "df" } th scope="col" class="n" { "p" }
                        th scope="col" class="n" { "alpha" } th scope="col" { "Role" }
                    } }
                    tbody { @for test in &look.tests { (test_row(view, look, test)) } }
                }
            }
            p class="facts" {
                "Standard deviation within sources " (digits.mean(look.sigma)) " " (view.bank.characteristic.unit)
                @if let Some(d) = look.dependence {
                    "; successive values correlate by " (format::plain(d.phi, 2)) " ± " (format::plain(d.std_error, 2))
                    @if d.variance_factor > 1.0 { ", paid for by a factor of " (format::plain(d.variance_factor, 2)) " on variances" }
                }
                "."
            }
        }
    }
}

fn test_row(view: &BankView, look: &Look, test: &TestEntry) -> Markup {
    let alpha = match test.method {
        _ if !test.decides => None,
        Method::BrownForsytheStepFree => Some(look.alpha_spread),
        _ => Some(look.alpha_level),
    };
    let on = match (test.raw, view.bank.pairing.is_paired()) {
        (false, true) => "within the cycle",
        _ => "raw values",
    };
    html! {
        tr class=[test.decides.then_some("decides")] {
            th scope="row" { (test.method.words()) }
            td { (on) }
            td class="n" { (format::statistic(test.statistic)) }
            td class="n" { (format::degrees(&test.df)) }
            td class="n" { (format::probability(test.p)) }
            td class="n" { @if let Some(alpha) = alpha { (format::probability(alpha)) } }
            td { (role(test, alpha)) }
        }
    }
}

fn role(test: &TestEntry, alpha: Option<f64>) -> &'static str {
    match alpha {
        Some(alpha) if test.p <= alpha => "decides: significant",
        Some(_) => "decides: not significant",
        None => "reported",
    }
}
