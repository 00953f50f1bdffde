//! A look for people: its two pictures, its tests and what to mind.

use maud::{Markup, html};

use crate::engine::BankView;
use crate::notice::Kind;
use crate::verdict::{Estimate, Look, Method, TestEntry};
use crate::web::address::{self, percent};
use crate::web::format;
use crate::web::pictures::{deviations, row, spread};

use super::frame::Scene;
use super::when::When;

/// What the pictures show.
pub struct Shown {
    /// The look; when it stands for now, with what the open notices say of the sources they name.
    pub look: Look,
    /// Whether it stands for now, or for the span that the reader asked for.
    pub is_now: bool,
}

/// The look over the span asked for; else the present, as the engine sees it.
pub fn shown(view: &BankView, asked: Option<usize>) -> Option<Shown> {
    let of_span = |span: usize| {
        let mut judged = view.looks.iter().filter(|l| !l.sources.is_empty());
        judged.find(|l| l.span == span)
    };
    if let Some(look) = asked.and_then(of_span) {
        return Some(Shown {
            look: Look::clone(look),
            is_now: false,
        });
    }
    let look = view.shown_span.and_then(of_span)?;
    Some(Shown {
        look: now(view, look),
        is_now: true,
    })
}

/// What an open notice says of a source rests on the values since it left: the pictures say the same.
fn now(view: &BankView, look: &Look) -> Look {
    let mut look = look.clone();
    for source in &mut look.sources {
        if let Some(known) = view.sources.iter().find(|s| s.source == source.source) {
            let named = |kinds: &[Kind]| known.named.iter().any(|k| kinds.contains(k));
            source.deviation = known.deviation;
            source.sd_ratio = known.sd_ratio;
            source.named_level = named(&[Kind::LevelApart, Kind::BankSplit]);
            source.named_spread = named(&[Kind::SpreadApart]);
        }
    }
    look
}

/// Now and the spans as links, the shown one marked.
pub fn span_links(view: &BankView, shown: &Shown, when: &When, anchor: &str) -> Markup {
    let page = address::bank(&view.bank.name);
    let judged = view.looks.iter().filter(|l| !l.sources.is_empty());
    html! {
        p class="spans" {
            a href={ (page) (when.query_over(None)) "#" (anchor) } aria-current=[shown.is_now.then_some("true")] {
                @if when.is_past { "Then" } @else { "Now" } }
            " or over the newest "
            @for look in judged {
                a href={ (page) (when.query_over(Some(look.span))) "#" (anchor) }
                    aria-current=[(!shown.is_now && look.span == shown.look.span).then_some("true")] { (look.span) }
                " "
            }
            "values of each source"
        }
    }
}

/// Which values a picture rests on.
fn basis(shown: &Shown) -> Markup {
    html! {
        @if shown.is_now {
            "The newest " (shown.look.span) " values of each source; a named source since it left. "
        }
    }
}

/// Where the figures of a look are for programs. One that stands for now is followed by the sources'
/// own list.
fn look_csv(view: &BankView, look: &Look) -> String {
    let bank = percent(&view.bank.name);
    format!(
        "/api/v1/banks/{bank}/looks/{}?at={}&form=csv",
        look.span,
        percent(&look.at.to_string())
    )
}

/// A link to the figures for programs.
pub fn csv(address: &str) -> Markup {
    html! { p class="csv" { a href=(address) { "The same as CSV" } } }
}

/// The picture of levels with its table.
pub fn level_picture(view: &BankView, shown: &Shown, when: &When) -> Markup {
    let look = &shown.look;
    let unit = &view.bank.characteristic.unit;
    html! {
        section id="level" class="picture" {
            h2 { (deviations::TITLE) }
            (span_links(view, shown, when, "level"))
            @match deviations::draw(&view.bank, look) {
                Some(picture) => {
                    (picture)
                    (row::key((view.bank.margin > 0.0).then(|| format!("the margin, {} {unit} wide", view.bank.margin))))
                    p class="caption" { (basis(shown)) "Deviation from the mean of the even set without the source itself, in " (unit)
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
    let what = &view.bank.characteristic;
    let unit = &view.bank.characteristic.unit;
    let ends = |e: Option<Estimate>, pick: fn(Estimate) -> f64| {
        e.map_or_else(|| "–".to_owned(), |e| what.deviation(pick(e)))
    };
    html! {
        details class="data" {
            summary { "The same as a table" }
            (csv(&look_csv(view, look)))
            div class="wide" tabindex="0" role="region" aria-label="Deviations" {
                table {
                    thead { tr {
                        th scope="col" { "Source" } th scope="col" class="n" { "Values" }
                        th scope="col" class="n" { "Mean, " (unit) } th scope="col" class="n" { "Deviation, " (unit) }
                        th scope="col" class="n" { "From" } th scope="col" class="n" { "To" } th scope="col" { "Stands" }
                    } }
                    tbody { @for s in &look.sources { tr class=[s.named_level.then_some("apart")] {
                        th scope="row" { (s.name) } td class="n" { (s.n) } td class="n" { (what.mean(s.mean)) }
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
pub fn spread_picture(view: &BankView, shown: &Shown, when: &When) -> Markup {
    let look = &shown.look;
    html! {
        section id="spread" class="picture" {
            h2 { (spread::TITLE) }
            (span_links(view, shown, when, "spread"))
            @match spread::draw(&view.bank, look) {
                Some(picture) => {
                    (picture)
                    (row::key(Some(format!("the spread margin, a factor of {}", view.bank.spread_margin))))
                    p class="caption" { (basis(shown)) "Standard deviation as a ratio to that of the others: 2× scatters twice as much." }
                    (spread_table(view, look))
                }
                None => (nothing(look)),
            }
        }
    }
}

fn spread_table(view: &BankView, look: &Look) -> Markup {
    let what = &view.bank.characteristic;
    let unit = &view.bank.characteristic.unit;
    html! {
        details class="data" {
            summary { "The same as a table" }
            (csv(&look_csv(view, look)))
            div class="wide" tabindex="0" role="region" aria-label="Spreads" {
                table {
                    thead { tr {
                        th scope="col" { "Source" } th scope="col" class="n" { "Values" }
                        th scope="col" class="n" { "Standard deviation, " (unit) }
                        th scope="col" class="n" { "Ratio (interval)" } th scope="col" { "Stands" }
                    } }
                    tbody { @for s in &look.sources { tr class=[s.named_spread.then_some("apart")] {
                        th scope="row" { (s.name) } td class="n" { (s.n) } td class="n" { (what.mean(s.sd)) }
                        td class="n" { @match s.sd_ratio { Some(r) => (spread::ratio_words(r)), None => "–" } }
                        td { @if s.named_spread { "apart, " (spread::word(s.sd_ratio)) } }
                    } } }
                }
            }
        }
    }
}

/// The newest looks, one table of tests per span.
pub fn tests(scene: &Scene<'_>, view: &BankView, shown: Option<usize>) -> Markup {
    html! {
        section id="look" {
            h2 { "What did the last looks say?" }
            p class="caption" { "Each span is judged on its own share of the call budget (" (view.bank.budget)
                "); a look calls when the deciding test passes its alpha and the difference is surely beyond the margin. “p, paid” is p after dependence between \
                successive values has been paid for; it decides." }
            @for look in &view.looks {
                details class="look" open[Some(look.span) == shown] {
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
    let what = &view.bank.characteristic;
    html! {
        @if !look.remark.is_empty() { p class="remark" { (super::frame::sentence(&look.remark)) } }
        @if !look.tests.is_empty() {
            div class="wide" tabindex="0" role="region" aria-label={ "Tests over " (look.span) " values" } {
                table class="tests" {
                    thead { tr {
                        th scope="col" { "Test" } th scope="col" { "On" } th scope="col" class="n" { "Statistic" }
                        th scope="col" class="n" { "df" } th scope="col" class="n" { "p" }
                        th scope="col" class="n" { "p, paid" } th scope="col" class="n" { "alpha" } th scope="col" { "Role" }
                    } }
                    tbody { @for test in &look.tests { (test_row(view, look, test)) } }
                }
            }
            p class="facts" {
                "Standard deviation within sources " (what.mean(look.sigma)) " " (view.bank.characteristic.unit)
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
            td class="n" { (format::probability(test.p_paid)) }
            td class="n" { @if let Some(alpha) = alpha { (format::probability(alpha)) } }
            td { (role(test, alpha)) }
        }
    }
}

fn role(test: &TestEntry, alpha: Option<f64>) -> &'static str {
    match alpha {
        Some(alpha) if test.p_paid <= alpha => "decides: significant",
        Some(_) => "decides: not significant",
        None => "reported",
    }
}
