//! The pictures of a source's page with their tables.

use maud::{Markup, html};

use crate::engine::{BankView, SourceView, WindowView};
use crate::model::{Characteristic, Value, signed};
use crate::web::address::{self, percent};
use crate::web::format;
use crate::web::pictures::course::{self, Course};
use crate::web::pictures::lags;
use crate::web::pictures::scale::{Scale, Spacing, tick_places};
use crate::web::pictures::shares::{self, Shares};
use crate::web::pictures::time_axis::TimeAxis;
use crate::web::pictures::values::{self, Values};
use crate::web::readings::{self, CLASSES, Reading, quantile};

use super::frame::Scene;
use super::history::{self, Past};
use super::looks::csv;
use super::when::When;

/// Newest values in the table.
const ROWS: usize = 40;

/// The raw values over time.
pub fn values(
    scene: &Scene<'_>,
    view: &BankView,
    own: &WindowView,
    others: &[&WindowView],
) -> Markup {
    let what = &view.bank.characteristic;
    let readings = readings::readings(own);
    let (Some(first), Some(last)) = (readings.first(), readings.last()) else {
        return html! {};
    };
    let axis = TimeAxis::new(
        first.0,
        last.0.max(first.0.plus_us(1)),
        view.bank.look_every_us,
    );
    let band = readings::band(others, axis.from, axis.to);
    let ends = band.iter().filter_map(|b| b.ends).flat_map(|(l, h)| [l, h]);
    let all = readings.iter().map(|r| r.1).chain(ends);
    let (low, high) = all.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), x| {
        (l.min(x), h.max(x))
    });
    let room = if high > low { (high - low) * 0.08 } else { 1.0 };
    let range = (low - room, high + room);
    let scale = Scale::new(Spacing::Linear, range, (values::TOP, values::BOTTOM));
    let ticks = scale.ticks(7);
    let places = tick_places(&ticks);
    let times = axis.ticks(&scene.times);
    let picture = Values {
        points: readings
            .iter()
            .map(|(at, x)| (axis.share(*at), *x))
            .collect(),
        others: &band,
        scale,
        ticks: ticks
            .iter()
            .map(|t| (*t, format::plain(*t, places)))
            .collect(),
        lines: lines(what, range),
        times: &times,
        unit: &what.unit,
        description: format!(
            "{} values of source {} from {} to {}, each a dot; the band holds the middle nine tenths of the others’.",
            readings.len(),
            own.source,
            scene.times.minute(axis.from),
            scene.times.minute(axis.to)
        ),
    };
    html! {
        section class="picture" {
            h2 { (values::TITLE) }
            div class="frame" { (picture.draw()) }
            p class="caption" { "Each dot is a value of " (own.source) "; the band holds the middle nine tenths of the others’ \
                values at the same time." }
            (value_table(scene, view, &readings, own))
        }
    }
}

/// Target and limits, as far as they lie in the picture.
fn lines(what: &Characteristic, (low, high): (f64, f64)) -> Vec<(f64, &'static str)> {
    let known = [
        (what.target.map(Value::to_f64), "target"),
        (what.declared.map(Value::to_f64), "declared"),
        (what.lower, "lower limit"),
        (what.upper, "upper limit"),
    ];
    let inside = known.into_iter().filter_map(|(at, word)| Some((at?, word)));
    inside.filter(|(at, _)| (low..=high).contains(at)).collect()
}

fn value_table(
    scene: &Scene<'_>,
    view: &BankView,
    readings: &[Reading],
    own: &WindowView,
) -> Markup {
    let what = &view.bank.characteristic;
    let address = format!(
        "/api/v1/banks/{}/windows?source={}&form=csv",
        percent(&view.bank.name),
        percent(&own.source)
    );
    html! {
        details class="data" {
            summary { "The newest as a table" }
            (csv(&address))
            div class="wide" tabindex="0" role="region" aria-label="Values" {
                table class="dense" {
                    thead { tr { th scope="col" { "Taken" } th scope="col" class="n" { "Value, " (what.unit) } } }
                    tbody { @for (at, value) in readings.iter().rev().take(ROWS) {
                        tr { th scope="row" { (scene.times.second(*at)) } td { (what.value(*value)) } }
                    } }
                }
            }
        }
    }
}

/// The distribution beside the others'.
pub fn shares(view: &BankView, own: &WindowView, others: &[&WindowView]) -> Markup {
    let what = &view.bank.characteristic;
    let own_values: Vec<f64> = readings::readings(own).iter().map(|r| r.1).collect();
    let others: Vec<f64> = others
        .iter()
        .flat_map(|w| readings::readings(w))
        .map(|r| r.1)
        .collect();
    let mut all: Vec<f64> = own_values.iter().chain(&others).copied().collect();
    all.sort_by(f64::total_cmp);
    // The outermost thousandths count at the ends, so that one wild value does not flatten the rest.
    let ends = quantile(&all, 0.001).zip(quantile(&all, 0.999));
    let Some((low, high)) = ends.filter(|(low, high)| high > low) else {
        return html! {
            section class="picture" { h2 { (shares::TITLE) } p class="empty" { "All values are equal so far." } }
        };
    };
    let ticks = Scale::new(Spacing::Linear, (low, high), (0.0, 1.0)).ticks(6);
    let places = tick_places(&ticks);
    let along = |t: &f64| ((t - low) / (high - low), format::plain(*t, places));
    let classes = (
        readings::shares(own_values.iter().copied(), low, high),
        readings::shares(others.iter().copied(), low, high),
    );
    let picture = Shares {
        own: &classes.0,
        others: &classes.1,
        ticks: ticks.iter().map(along).collect(),
        unit: &what.unit,
        description: format!(
            "Shares of the {} values of source {} in classes, as a line, before those of the {} values of the others.",
            own_values.len(),
            own.source,
            others.len()
        ),
    };
    html! {
        section class="picture" {
            h2 { (shares::TITLE) }
            div class="frame" { (picture.draw()) }
            p class="caption" { "The line is " (own.source) ", the ground is the others together; both are shares of their own \
                values. The outermost thousandth counts at the ends." }
            (share_table(what, (low, high), &classes))
        }
    }
}

fn share_table(
    what: &Characteristic,
    (low, high): (f64, f64),
    (own, others): &(Vec<f64>, Vec<f64>),
) -> Markup {
    let edge = |class: usize| low + (high - low) * class as f64 / CLASSES as f64;
    let cent = |share: f64| format!("{} %", format::plain(share * 100.0, 1));
    html! {
        details class="data" {
            summary { "The same as a table" }
            div class="wide" tabindex="0" role="region" aria-label="Shares of values" {
                table class="dense" {
                    thead { tr { th scope="col" { "From, " (what.unit) } th scope="col" class="n" { "To" }
                        th scope="col" class="n" { "This source" } th scope="col" class="n" { "The others" } } }
                    tbody { @for (class, (own, others)) in own.iter().zip(others).enumerate() {
                        tr { th scope="row" { (what.mean(edge(class))) } td { (what.mean(edge(class + 1))) }
                            td { (cent(*own)) } td { (cent(*others)) } }
                    } }
                }
            }
        }
    }
}

/// How values follow each other.
pub fn lags(view: &BankView, own: &WindowView, others: &[&WindowView]) -> Markup {
    let within = readings::within_cycles(own, others);
    let paired = view.bank.pairing.is_paired();
    let on = if paired {
        "its values less the mean of the others in the same cycle"
    } else {
        "its values"
    };
    html! {
        section class="picture" {
            h2 { (lags::TITLE) }
            @match readings::correlations(&within) {
                None => p class="empty" { "Too few values, or all equal: nothing can be said." },
                Some((found, limit)) => {
                    div class="frame" { (lags::draw(&found, limit, &format!(
                        "Correlation of {on} with those 1 to {} before, on {} values; chance alone stays within ±{} nineteen \
                         times of twenty.", found.len(), within.len(), format::plain(limit, 2)))) }
                    p class="caption" { "Correlation of " (on) " with those before it, by how many. Chance alone stays between the \
                        lines nineteen times of twenty. Dependence makes a look’s intervals wider: the looks pay for it." }
                    details class="data" { summary { "The same as a table" }
                        div class="wide" tabindex="0" role="region" aria-label="Correlations" { table class="dense" {
                            thead { tr { th scope="col" { "Values before" } th scope="col" class="n" { "Correlation" } } }
                            tbody { @for (at, c) in found.iter().enumerate() {
                                tr { th scope="row" { (at + 1) } td { (format::plain(*c, 3)) } } } }
                        } } }
                }
            }
        }
    }
}

/// The source's deviation at the looks that were kept.
pub fn course(
    scene: &Scene<'_>,
    view: &BankView,
    source: &SourceView,
    past: &Past,
    when: &When,
) -> Markup {
    let what = &view.bank.characteristic;
    let looks: Vec<_> = past.digests.iter().collect();
    let axis = TimeAxis::new(past.from, when.to, view.bank.look_every_us);
    let of = |look: &crate::verdict::Digest| {
        let mut those = look.deviations.iter();
        let (_, found) = those.find(|(name, _)| *name == source.name)?;
        found.map(f64::from).filter(|x| x.is_finite())
    };
    let placed = axis.place(&looks, view.bank.look_every_us);
    let figures: Vec<Option<f64>> = placed.iter().map(|look| look.and_then(of)).collect();
    let size = figures
        .iter()
        .flatten()
        .map(|x| x.abs())
        .fold(view.bank.margin, f64::max);
    let size = if size > 0.0 { size * 1.15 } else { 1.0 };
    let scale = Scale::new(
        Spacing::Linear,
        (-size, size),
        (course::TOP, course::BOTTOM),
    );
    let ticks = scale.ticks(5);
    let places = tick_places(&ticks);
    let row = view.sources.iter().position(|s| s.source == source.source);
    let mut incidents = history::incidents(scene, view, past, &axis);
    incidents.retain(|i| row.is_some_and(|row| i.rows.contains(&row)));
    let times = axis.ticks(&scene.times);
    let page = address::source(&view.bank.name, &source.name);
    let picture = Course {
        figures: &figures,
        scale,
        ticks: ticks.iter().map(|t| (*t, signed(*t, places))).collect(),
        margin: (view.bank.margin > 0.0).then_some(view.bank.margin),
        incidents: &incidents,
        times: &times,
        unit: &what.unit,
        description: format!(
            "Deviation of source {} from the others at the looks from {} to {}; frames are notices that named it.",
            source.name,
            scene.times.minute(axis.from),
            scene.times.minute(axis.to)
        ),
    };
    html! {
        section id="course" class="picture" {
            h2 { (course::TITLE) }
            (when.stretches(&page, "course"))
            @if figures.iter().all(Option::is_none) { p class="empty" { "No look judged it in this time." } }
            @else {
                div class="frame" { (picture.draw()) }
                p class="caption" { "Deviation from the others at the newest look of each column; the band reaches one margin to \
                    both sides of them. Of past looks the figures are kept, their intervals are not; frames are notices that named it." }
                details class="data" { summary { "The same as a table" }
                    div class="wide" tabindex="0" role="region" aria-label="Deviation over time" { table class="dense" {
                        thead { tr { th scope="col" { "Until" } th scope="col" class="n" { "Deviation, " (what.unit) } } }
                        tbody { @for (column, figure) in figures.iter().enumerate().rev() { @if let Some(x) = figure {
                            tr { th scope="row" { (scene.times.short(axis.end_of(column))) } td { (what.deviation(*x)) } } } } }
                    } } }
            }
        }
    }
}
