//! The hours behind us: the time band and the evidence, from the looks that were kept.

use maud::{Markup, html};

use crate::engine::BankView;
use crate::model::{Characteristic, Time, US_PER_DAY, US_PER_S};
use crate::notice::Notice;
use crate::verdict::Digest;
use crate::web::address::{self, percent};
use crate::web::pictures::deviations::full_tone;
use crate::web::pictures::evidence::{self, Evidence};
use crate::web::pictures::time_axis::{MOST_COLUMNS, TimeAxis};
use crate::web::pictures::time_band::{self, Incident, TimeBand};
use crate::web::problem::Problem;
use crate::web::site::App;
use crate::web::{format, story};

use super::frame::Scene;
use super::looks::{Shown, csv, span_links};
use super::when::When;

/// A young bank's picture covers at least this, so that it does not stretch a minute over the page.
const LEAST_US: i64 = 6 * 60 * US_PER_S;
/// Most cells of the table beside the time band; beyond it every second, third … column is given.
const MOST_CELLS: usize = 2400;

/// What was read from the store.
pub struct Past {
    /// Short forms of looks over the span that is shown, oldest first, as many as the pictures have
    /// columns.
    pub digests: Vec<Digest>,
    /// Notices of this bank, newest first.
    pub notices: Vec<Notice>,
    /// Where the pictures begin.
    pub from: Time,
}

/// Reads what the pictures show; a page of the present is shown even when the store cannot be read,
/// and says so.
///
/// # Errors
/// 503 when the store cannot be read.
pub async fn read(
    app: &App,
    name: &str,
    span: Option<usize>,
    when: &When,
) -> Result<Past, Problem> {
    let (name, from, to, cut) = (name.to_owned(), when.from, when.to, when.is_cut);
    app.history(move |h| {
        let thinned = |from: Time| match span {
            Some(span) => h.digests_thinned(&name, span, (from, to.plus_us(1)), MOST_COLUMNS),
            None => Ok(Vec::new()),
        };
        let mut digests = thinned(from)?;
        let mut begin = from;
        // A young bank fills its picture; it is read again in finer steps.
        if let (false, Some(first)) = (cut, digests.first()) {
            let latest = to.plus_us(-LEAST_US);
            let oldest = h.digests(&name, from, first.at.plus_us(1), usize::MAX)?;
            let start = oldest.iter().map(|d| d.at).min().unwrap_or(first.at);
            if start.us_since(from) > to.us_since(from) / 8 {
                begin = start.min(latest).max(from);
                digests = thinned(begin)?;
            }
        }
        // Notices raised before the picture may reach into it.
        let back = begin.plus_us(-30 * US_PER_DAY);
        let mut notices = story::notices(h, Some(&name), (back, to.plus_us(1)))?;
        notices.retain(|n| story::end(n).is_none_or(|end| end >= begin));
        Ok(Past {
            digests,
            notices,
            from: begin,
        })
    })
    .await
}

/// Both pictures with their tables.
pub fn section(
    scene: &Scene<'_>,
    view: &BankView,
    past: &Past,
    shown: &Shown,
    when: &When,
) -> Markup {
    let span = shown.look.span;
    let page = address::bank(&view.bank.name);
    let looks: Vec<&Digest> = past.digests.iter().collect();
    if looks.is_empty() {
        return html! {
            section id="time" class="picture" {
                h2 { (time_band::TITLE) }
                (when.stretches(&page, "time"))
                p class="empty" { "No look over " (span) " values in this time." }
            }
        };
    }
    let axis = TimeAxis::new(past.from, when.to, view.bank.look_every_us);
    let placed = axis.place(&looks, view.bank.look_every_us);
    let ticks = axis.ticks(&scene.times);
    let full = scale(view, &looks);
    let what = &view.bank.characteristic;
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
            scene.times.minute(past.from),
            scene.times.minute(when.to)
        ),
    };
    let frame = if band.has_long_names() {
        "frame long"
    } else {
        "frame"
    };
    let data = looks_csv(view, span, past.from, when.to);
    html! {
        section id="time" class="picture" {
            h2 { (time_band::TITLE) }
            (span_links(view, shown, when, "time"))
            (when.stretches(&page, "time"))
            div id="probe" class=(frame) data-from=(past.from) data-to=(when.to) data-columns=(axis.columns)
                data-rows=(view.sources.len()) data-looks=(looks_address(view)) data-span=(span) data-unit=(what.unit)
                data-every=(view.bank.look_every_us / US_PER_S) { (band.draw()) }
            p id="reading" class="reading" role="status" {}
            (time_band::legend(full, &what.unit, |x| what.deviation(x)))
            (cells(scene, view, &axis, &placed, &data))
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
                budget, and the margin make a call. A diamond is a look that found the bank apart. Where a column holds \
                several looks, the newest is drawn." }
            (figures(scene, &axis, &placed, &data))
        }
    }
}

fn looks_address(view: &BankView) -> String {
    format!("/api/v1/banks/{}/looks", percent(&view.bank.name))
}

/// Where the same figures are for programs.
fn looks_csv(view: &BankView, span: usize, from: Time, to: Time) -> String {
    let time = |at: Time| percent(&at.to_string());
    format!(
        "{}?span={span}&from={}&to={}&form=csv",
        looks_address(view),
        time(from),
        time(to)
    )
}

fn scale(view: &BankView, looks: &[&Digest]) -> f64 {
    let all = looks
        .iter()
        .flat_map(|d| d.deviations.iter().filter_map(|(_, x)| *x));
    let all: Vec<f64> = all.map(f64::from).collect();
    full_tone(&view.bank, &all)
}

/// Notices of this bank that lie in the picture; open ones as they stand.
pub fn incidents(
    scene: &Scene<'_>,
    view: &BankView,
    past: &Past,
    axis: &TimeAxis,
) -> Vec<Incident> {
    let kept = past
        .notices
        .iter()
        .filter(|n| !view.open.iter().any(|o| o.id == n.id));
    let all = view.open.iter().map(AsRef::as_ref).chain(kept);
    let shown = all.filter_map(|notice| {
        let end = story::end(notice).unwrap_or(axis.to);
        (end >= axis.from && notice.since.at <= axis.to).then(|| Incident {
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

fn cells(
    scene: &Scene<'_>,
    view: &BankView,
    axis: &TimeAxis,
    looks: &[Option<&Digest>],
    data: &str,
) -> Markup {
    let what = &view.bank.characteristic;
    let every = (looks.len() * view.sources.len())
        .div_ceil(MOST_CELLS)
        .max(1);
    let shown = looks.iter().enumerate().rev().step_by(every);
    html! {
        details class="data" {
            summary { "The same as a table" }
            (csv(data))
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

fn figures(scene: &Scene<'_>, axis: &TimeAxis, looks: &[Option<&Digest>], data: &str) -> Markup {
    let p = |p: Option<f64>| p.map_or_else(|| "–".to_owned(), format::probability);
    let until = |column: usize| -> Time { axis.end_of(column) };
    html! {
        details class="data" {
            summary { "The same as a table" }
            (csv(data))
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
