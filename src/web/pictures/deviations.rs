//! "Which sources are apart, and by how much?": deviations from the others with their intervals.

use maud::Markup;

use crate::model::{Bank, Characteristic, Value, signed};
use crate::verdict::{Estimate, Look};

use super::band;
use super::ring;
use super::row::{BOTTOM, Mark, Row, TOP};
use super::scale::{Scale, Spacing, tick_places};

/// The question.
pub const TITLE: &str = "Which sources are apart, and by how much?";

/// Draws one look's deviations, for rotary machines also as a ring; `None` when it could judge nobody.
pub fn draw(bank: &Bank, look: &Look) -> Option<Markup> {
    let what = &bank.characteristic;
    let figures: Vec<f64> = look
        .sources
        .iter()
        .filter_map(|s| s.deviation)
        .map(|d| d.value)
        .collect();
    let band = band::place(&figures, bank.margin);
    let estimates = look.sources.iter().filter_map(|s| s.deviation);
    let range = range(estimates, band, bank.margin)?;
    let scale = Scale::new(Spacing::Linear, range, (TOP, BOTTOM));
    let ticks = scale.ticks(5);
    let places = tick_places(&ticks);
    let full = full_tone(bank, &figures);
    let marks = look.sources.iter().map(|s| Mark {
        name: s.name.to_string(),
        figure: s.deviation,
        apart: s.named_level.then(|| word(s.deviation)),
        words: words(&s.name, s.deviation, what, &what.unit),
        tone: s.deviation.map_or(0.0, |d| d.value / full),
    });
    let row = Row {
        id: "deviations",
        title: TITLE,
        description: description(bank, look, what),
        marks: marks.collect(),
        scale,
        ticks: ticks.iter().map(|t| (*t, signed(*t, places))).collect(),
        lines: lines(what, look, range),
        even_at: 0.0,
        band,
        unit: &what.unit,
    };
    Some(ring::framed(&row, bank.layout))
}

/// Target and limits of a single value, seen from the mean of all, as far as they lie in the picture.
fn lines(what: &Characteristic, look: &Look, (low, high): (f64, f64)) -> Vec<(f64, &'static str)> {
    let known = look
        .sources
        .iter()
        .map(|s| s.mean)
        .filter(|m| m.is_finite());
    let (count, sum) = known.fold((0.0, 0.0), |(n, sum), m| (n + 1.0, sum + m));
    let mean: f64 = sum / count;
    let of = |value: Option<f64>, word| Some((value? - mean, word));
    [
        of(what.target.map(Value::to_f64), "target"),
        of(what.lower, "lower limit of a value"),
        of(what.upper, "upper limit of a value"),
    ]
    .into_iter()
    .flatten()
    .filter(|(at, _)| (low..=high).contains(at))
    .collect()
}

/// Where the colour scale is full: at twice the margin, or at the largest deviation without one.
pub fn full_tone(bank: &Bank, figures: &[f64]) -> f64 {
    if bank.margin > 0.0 {
        return 2.0 * bank.margin;
    }
    let largest = figures
        .iter()
        .map(|x| x.abs())
        .filter(|x| x.is_finite())
        .fold(0.0, f64::max);
    if largest > 0.0 { largest } else { 1.0 }
}

/// The word for a named source.
pub fn word(deviation: Option<Estimate>) -> &'static str {
    match deviation {
        Some(d) if d.value < 0.0 => "low",
        _ => "high",
    }
}

fn words(name: &str, deviation: Option<Estimate>, what: &Characteristic, unit: &str) -> String {
    match deviation {
        Some(Estimate { value, low, high }) => format!(
            "{name}: {} {unit} ({} to {})",
            what.deviation(value),
            what.deviation(low),
            what.deviation(high)
        ),
        None => format!("{name}: too few values to judge"),
    }
}

fn description(bank: &Bank, look: &Look, what: &Characteristic) -> String {
    let unit = &bank.characteristic.unit;
    let named: Vec<String> = look
        .sources
        .iter()
        .filter(|s| s.named_level)
        .map(|s| words(&s.name, s.deviation, what, unit))
        .collect();
    let said = if named.is_empty() {
        "No source is named.".to_owned()
    } else {
        format!("Named: {}.", named.join("; "))
    };
    format!(
        "Deviation of {} sources from the mean of the even set without the source itself, in {unit}, \
         with simultaneous 95 % intervals, over {} values each. {said}",
        look.sources.len(),
        look.span
    )
}

/// Figures and intervals fit; an interval much wider than everything else runs to the edge.
fn range(
    estimates: impl Iterator<Item = Estimate> + Clone,
    band: Option<(f64, f64)>,
    margin: f64,
) -> Option<(f64, f64)> {
    let finite = estimates.filter(|e| e.value.is_finite());
    let size = finite.clone().map(|e| e.value.abs()).fold(margin, f64::max);
    finite.clone().next()?;
    let wall = if size > 0.0 {
        3.0 * size
    } else {
        f64::INFINITY
    };
    let ends = finite.flat_map(|e| [e.low.max(-wall), e.high.min(wall), e.value]);
    let ends = ends
        .chain(band.into_iter().flat_map(|(l, h)| [l, h]))
        .chain([0.0]);
    let ends: Vec<f64> = ends.filter(|x| x.is_finite()).collect();
    let low = ends.iter().copied().fold(0.0, f64::min);
    let high = ends.iter().copied().fold(0.0, f64::max);
    let room = if high > low { (high - low) * 0.06 } else { 1.0 };
    // A named source at an end has its name written beyond it.
    Some((low - room * 2.2, high + room * 1.5))
}
