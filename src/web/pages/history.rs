//! The hours behind us: the time band and the evidence, from the looks that were kept.

use maud::{Markup, html};

use crate::engine::BankView;
use crate::model::{Characteristic, Time, US_PER_S};
use crate::notice::Notice;
use crate::verdict::Digest;
use crate::web::format;
use crate::web::pictures::deviations::full_tone;
use crate::web::pictures::evidence::{self, Evidence};
use crate::web::pictures::time_axis::TimeAxis;
use crate::web::pictures::time_band::{self, Incident, TimeBand};

use super::frame::Scene;
use super::looks::{Shown, span_links};

/// How far back the pictures go: a shift.
pub const BACK_US: i64 = 8 * 3600 * US_PER_S;
/// A young bank's picture covers at least this, so that it does not stretch a minute over the page.
const LEAST_US: i64 = 6 * 60 * US_PER_S;
/// Most cells of the table beside the time band; beyond it every second, third … column is given.
const MOST_CELLS: usize = 2400;

/// What was read from the store.
pub struct Past {
    /// Short forms of looks, oldest first.
    pub digests: Vec<Digest>,
    /// Notices of this bank, newest first.
    pub notices: Vec<Notice>,
}

/// Both pictures with their tables.
pub fn section(scene: &Scene<'_>, view: &BankView, past: &Past, shown: &Shown) -> Markup {
    let span = shown.look.span;
    let looks: Vec<&Digest> = past.digests.iter().filter(|d| d.span == span).collect();
    let Some(first) = looks.first() else {
        return html! {
            section class="picture" {
                h2 { (time_band::TITLE) }
                p class="empty" { "No look over " (span) " values in the last 8 hours. The picture begins with the first one." }
            }
        };
    };
    let to = scene.times.now;
    let from = first
        .at
        .min(to.plus_us(-LEAST_US))
        .max(to.plus_us(-BACK_US));
    let axis = TimeAxis::new(from, to, view.bank.look_every_us);
    let placed = axis.place(&looks, view.bank.look_every_us);
    let ticks = axis.ticks(&scene.times);
    let full = scale(view, &looks);
    let unit = &view.bank.characteristic.unit;
    let band = TimeBand {
        axis: &axis,
        ticks: &ticks,
        sources: view.sources.iter().map(|s| &*s.name).collect(),
        looks: &placed,
        incidents: incidents(scene, view, past, &axis),
        full,
        description: format!(
            "Deviation of each source from the others at the looks over {span} values from {} to {}; \
             outlines are notices.",
            scene.times.minute(from),
            scene.times.minute(to)
        ),
    };
    let what = &view.bank.characteristic;
    let frame = if band.has_long_names() {
        "frame long"
    } else {
        "frame"
    };
    html! {
        section id="time" class="picture" {
            h2 { (time_band::TITLE) }
            (span_links(view, shown, "time"))
            div class=(frame) { (band.draw()) }
            (time_band::legend(full, unit, |x| what.deviation(x)))
            (cells(scene, view, &axis, &placed))
        }
        section id="evidence" class="picture" {
            h2 { (evidence::TITLE) }
            div class=(frame) { (Evidence {
                axis: &axis, ticks: &ticks, looks: &placed,
                description: format!("p of the deciding tests for level and spread over {span} values, and the \
                    alpha that a look must pass. Higher is less likely."),
            }.draw()) }
            p class="caption" { "p of the deciding tests, level as a full line and spread as a dashed one; higher is less \
                likely. Small values come by chance when one looks often: only the alpha line, which shares out the call \
                budget, and the margin make a call. A diamond is a look that found the bank apart." }
            (figures(scene, &axis, &placed))
        }
    }
}

fn scale(view: &BankView, looks: &[&Digest]) -> f64 {
    let all = looks
        .iter()
        .flat_map(|d| d.deviations.iter().filter_map(|(_, x)| *x));
    let all: Vec<f64> = all.map(f64::from).collect();
    full_tone(&view.bank, &all)
}

/// Notices of this bank that lie in the picture; open ones as they stand now.
fn incidents(scene: &Scene<'_>, view: &BankView, past: &Past, axis: &TimeAxis) -> Vec<Incident> {
    let kept = past
        .notices
        .iter()
        .filter(|n| !view.open.iter().any(|o| o.id == n.id));
    let all = view.open.iter().map(AsRef::as_ref).chain(kept);
    let shown = all.filter_map(|notice| {
        let end = notice.returned.filter(|_| !notice.state.is_active());
        let end = end.unwrap_or(if notice.state.is_active() {
            axis.to
        } else {
            notice.changed
        });
        (end >= axis.from).then(|| Incident {
            rows: rows(view, notice),
            extent: (axis.share(notice.since.at), axis.share(end)),
            is_active: notice.state.is_active(),
            words: format!(
                "{}: {}, since {}",
                notice.id,
                notice.kind.words(),
                scene.times.minute(notice.since.at)
            ),
        })
    });
    shown.collect()
}

fn rows(view: &BankView, notice: &Notice) -> Vec<usize> {
    let named = |name: &str| notice.sources.iter().any(|s| &*s.source == name);
    let sources = view.sources.iter().enumerate();
    sources
        .filter(|(_, s)| named(&s.name))
        .map(|(at, _)| at)
        .collect()
}

fn cells(scene: &Scene<'_>, view: &BankView, axis: &TimeAxis, looks: &[Option<&Digest>]) -> Markup {
    let what = &view.bank.characteristic;
    let every = (looks.len() * view.sources.len())
        .div_ceil(MOST_CELLS)
        .max(1);
    let shown = looks.iter().enumerate().rev().step_by(every);
    html! {
        details class="data" {
            summary { "The same as a table" }
            @if every > 1 {
                p class="caption" { "One in " (every) " columns of the picture; the interface gives all of them." }
            }
            div class="wide" tabindex="0" role="region" aria-label="Deviations over time" {
                table class="dense" {
                    thead { tr { th scope="col" { "Until" }
                        @for s in &view.sources { th scope="col" class="n" { (s.name) } } } }
                    tbody {
                        @for (column, look) in shown {
                            @if let Some(look) = look {
                                tr { th scope="row" { (scene.times.short(axis.end_of(column))) }
                                    @for s in &view.sources { td { (of(look, &s.name, what)) } } }
                            }
                        }
                    }
                }
            }
        }
    }
}

fn of(look: &Digest, name: &str, what: &Characteristic) -> String {
    let found = look.deviations.iter().find(|(n, _)| &**n == name);
    found
        .and_then(|(_, x)| *x)
        .map_or_else(|| "–".to_owned(), |x| what.deviation(f64::from(x)))
}

fn figures(scene: &Scene<'_>, axis: &TimeAxis, looks: &[Option<&Digest>]) -> Markup {
    let p = |p: Option<f64>| p.map_or_else(|| "–".to_owned(), format::probability);
    let until = |column: usize| -> Time { axis.end_of(column) };
    html! {
        details class="data" {
            summary { "The same as a table" }
            div class="wide" tabindex="0" role="region" aria-label="Evidence over time" {
                table class="dense" {
                    thead { tr { th scope="col" { "Until" } th scope="col" { "Finding" }
                        th scope="col" class="n" { "p, level" } th scope="col" class="n" { "alpha" }
                        th scope="col" class="n" { "p, spread" } th scope="col" class="n" { "alpha" } } }
                    tbody {
                        @for (column, look) in looks.iter().enumerate().rev() {
                            @if let Some(look) = look {
                                tr { th scope="row" { (scene.times.short(until(column))) }
                                    td { (look.finding.words()) }
                                    td class="n" { (p(look.level_p)) } td class="n" { (p(Some(look.alpha_level))) }
                                    td class="n" { (p(look.spread_p)) } td class="n" { (p(Some(look.alpha_spread))) } }
                            }
                        }
                    }
                }
            }
        }
    }
}
