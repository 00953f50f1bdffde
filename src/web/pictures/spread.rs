//! "Whose values scatter more or less than the others'?": ratios of standard deviations with their
//! intervals, on a scale on which equal ratios look equal.

use maud::Markup;

use crate::model::Bank;
use crate::verdict::{Estimate, Look};
use crate::web::format;

use super::band;
use super::ring;
use super::row::{BOTTOM, Mark, Row, TOP};
use super::scale::{Scale, Spacing};

/// The question.
pub const TITLE: &str = "Whose values scatter more or less than the others’?";

/// Draws one look's ratios; `None` when it could judge nobody.
pub fn draw(bank: &Bank, look: &Look) -> Option<Markup> {
    let ratios: Vec<f64> = look
        .sources
        .iter()
        .filter_map(|s| s.sd_ratio)
        .map(|r| r.value)
        .collect();
    let logs: Vec<f64> = ratios.iter().map(|r| r.ln()).collect();
    let placed = band::place(&logs, bank.spread_margin.ln());
    let band = placed.map(|(low, high)| (low.exp(), high.exp()));
    let range = range(look.sources.iter().filter_map(|s| s.sd_ratio), band)?;
    let scale = Scale::new(Spacing::Ratio, range, (TOP, BOTTOM));
    let marks = look.sources.iter().map(|s| Mark {
        name: s.name.to_string(),
        figure: s.sd_ratio,
        apart: s.named_spread.then(|| word(s.sd_ratio)),
        words: words(&s.name, s.sd_ratio),
        tone: s
            .sd_ratio
            .map_or(0.0, |r| r.value.ln() / (2.0 * bank.spread_margin.ln())),
    });
    let row = Row {
        id: "spread",
        title: TITLE,
        description: description(look),
        marks: marks.collect(),
        scale,
        ticks: scale
            .ticks(5)
            .into_iter()
            .map(|t| (t, format!("{t}×")))
            .collect(),
        lines: Vec::new(),
        even_at: 1.0,
        band,
        unit: "",
    };
    Some(ring::framed(&row, bank.layout))
}

/// The word for a named source.
pub fn word(ratio: Option<Estimate>) -> &'static str {
    match ratio {
        Some(r) if r.value < 1.0 => "quiet",
        _ => "erratic",
    }
}

/// A ratio with its interval.
pub fn ratio_words(Estimate { value, low, high }: Estimate) -> String {
    let two = |x| format::plain(x, 2);
    format!("{}× ({} to {})", two(value), two(low), two(high))
}

fn words(name: &str, ratio: Option<Estimate>) -> String {
    match ratio {
        Some(ratio) => format!("{name}: {}", ratio_words(ratio)),
        None => format!("{name}: too few values to judge"),
    }
}

fn description(look: &Look) -> String {
    let named: Vec<String> = look
        .sources
        .iter()
        .filter(|s| s.named_spread)
        .map(|s| words(&s.name, s.sd_ratio))
        .collect();
    let said = if named.is_empty() {
        "No source is named.".to_owned()
    } else {
        format!("Named: {}.", named.join("; "))
    };
    format!(
        "Standard deviation of {} sources as a ratio to that of the others, with simultaneous 95 % \
         intervals, over {} values each. {said}",
        look.sources.len(),
        look.span
    )
}

/// No narrower than a factor of two to either side, no wider than a factor of fifty.
fn range(ratios: impl Iterator<Item = Estimate>, band: Option<(f64, f64)>) -> Option<(f64, f64)> {
    let mut some = false;
    let ends = ratios
        .flat_map(|r| [r.low, r.high, r.value])
        .inspect(|_| some = true);
    let ends: Vec<f64> = ends.filter(|x| x.is_finite() && *x > 0.0).collect();
    let all = ends
        .into_iter()
        .chain(band.into_iter().flat_map(|(l, h)| [l, h]));
    let (low, high) = all.fold((0.6, 1.7), |(l, h): (f64, f64), x| (l.min(x), h.max(x)));
    some.then(|| ((low / 1.06).max(0.02), (high * 1.06).min(50.0)))
}
