//! "What has it delivered?": a source's raw values over time, before the band in which the middle
//! nine tenths of its siblings' values lie.

use std::fmt::Write as _;

use maud::{Markup, html};

use crate::web::readings::Band;

use super::px;
use super::scale::Scale;
use super::time_band::time_labels;

/// The question.
pub const TITLE: &str = "What has it delivered, and the others meanwhile?";
/// Top of the plotting area, in pixels.
pub const TOP: f64 = 14.0;
/// Its bottom.
pub const BOTTOM: f64 = 254.0;
/// Room for the time axis.
const AXIS: f64 = 26.0;
/// Across, the picture has this many places; enough for a wall screen.
const ACROSS: f64 = 2000.0;

/// What the picture shows.
pub struct Values<'a> {
    /// The source's values: share of the time across, value.
    pub points: Vec<(f64, f64)>,
    /// Its siblings.
    pub others: &'a [Band],
    /// The scale.
    pub scale: Scale,
    /// Its ticks.
    pub ticks: Vec<(f64, String)>,
    /// Target and limits, as far as they lie in the picture.
    pub lines: Vec<(f64, &'static str)>,
    /// Ticks of time.
    pub times: &'a [(f64, String)],
    /// The unit.
    pub unit: &'a str,
    /// The answer in a sentence or two.
    pub description: String,
}

impl Values<'_> {
    /// Draws it.
    pub fn draw(&self) -> Markup {
        let view = format!("0 0 {ACROSS} {}", px(BOTTOM + AXIS));
        html! {
            svg class="plot values" width="100%" height=(px(BOTTOM + AXIS)) role="img"
                aria-labelledby="values-t" aria-describedby="values-d" {
                title id="values-t" { (TITLE) }
                desc id="values-d" { (self.description) }
                text class="tick" x="-8" y="4" text-anchor="end" { (self.unit) }
                @for (at, label) in &self.ticks {
                    @let y = px(self.scale.place(*at));
                    line class="grid" x1="0" x2="100%" y1=(y) y2=(y) {}
                    text class="tick" x="-8" y=(y) dy="0.35em" text-anchor="end" { (label) }
                }
                svg width="100%" height=(px(BOTTOM + AXIS)) viewBox=(view) preserveAspectRatio="none" {
                    path class="siblings" d=(self.band()) {}
                    path class="dots" d=(self.dots()) {}
                }
                @for (at, label) in &self.lines {
                    @let y = self.scale.place(*at);
                    line class="alpha" x1="0" x2="100%" y1=(px(y)) y2=(px(y)) {}
                    text class="margin-label" x="100%" dx="-6" y=(px(y - 5.0)) text-anchor="end" { (label) }
                }
                (time_labels(self.times, TOP, BOTTOM))
            }
        }
    }

    fn dots(&self) -> String {
        let mut path = String::with_capacity(self.points.len() * 14);
        for (share, value) in &self.points {
            // Writing to a String cannot fail.
            let _ = write!(
                path,
                "M{:.0} {}h0",
                share * ACROSS,
                px(self.scale.place(*value))
            );
        }
        path
    }

    /// There along the upper ends, back along the lower ones; a gap in time begins a new piece.
    fn band(&self) -> String {
        let mut path = String::new();
        for piece in self.others.split(|b| b.ends.is_none()) {
            let ends = || piece.iter().filter_map(|b| Some((b, b.ends?)));
            let (Some(first), Some(last)) = (piece.first(), piece.last()) else {
                continue;
            };
            let place = |share: f64, value: f64| {
                format!("{:.0} {}", share * ACROSS, px(self.scale.place(value)))
            };
            let mut corners: Vec<String> = Vec::new();
            corners.extend(ends().take(1).map(|(_, (_, high))| place(first.from, high)));
            corners.extend(ends().map(|(b, (_, high))| place(b.to, high)));
            corners.extend(ends().rev().map(|(b, (low, _))| place(b.to, low)));
            corners.extend(ends().take(1).map(|(_, (low, _))| place(first.from, low)));
            if last.to > first.from {
                let _ = write!(path, "M{}Z", corners.join("L"));
            }
        }
        path
    }
}
