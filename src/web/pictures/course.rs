//! "How did it stand over time?": one source's deviation from the others at the looks that were kept,
//! with the margin to both sides and the notices that named it.

use std::fmt::Write as _;

use maud::{Markup, html};

use super::scale::Scale;
use super::time_band::{Incident, time_labels};
use super::{percent, px};

/// The question.
pub const TITLE: &str = "How did it stand over time?";
/// Top of the plotting area, in pixels.
pub const TOP: f64 = 14.0;
/// Its bottom.
pub const BOTTOM: f64 = 204.0;
const AXIS: f64 = 26.0;

/// What the picture shows.
pub struct Course<'a> {
    /// The deviation of each column, where there was one.
    pub figures: &'a [Option<f64>],
    /// The scale.
    pub scale: Scale,
    /// Its ticks.
    pub ticks: Vec<(f64, String)>,
    /// The margin, when there is one.
    pub margin: Option<f64>,
    /// The notices that named it.
    pub incidents: &'a [Incident],
    /// Ticks of time.
    pub times: &'a [(f64, String)],
    /// The unit.
    pub unit: &'a str,
    /// The answer in a sentence or two.
    pub description: String,
}

impl Course<'_> {
    /// Draws it.
    pub fn draw(&self) -> Markup {
        let view = format!("0 0 {} {}", self.figures.len().max(1), px(BOTTOM + AXIS));
        html! {
            svg class="plot course" width="100%" height=(px(BOTTOM + AXIS)) role="img"
                aria-labelledby="course-t" aria-describedby="course-d" {
                title id="course-t" { (TITLE) }
                desc id="course-d" { (self.description) }
                @if let Some(margin) = self.margin {
                    @let (top, bottom) = (self.scale.place(margin), self.scale.place(-margin));
                    rect class="margin" x="0" width="100%" y=(px(top)) height=(px(bottom - top)) {}
                }
                text class="tick" x="-8" y="4" text-anchor="end" { (self.unit) }
                @for (at, label) in &self.ticks {
                    @let y = px(self.scale.place(*at));
                    line class=(if *at == 0.0 { "zero" } else { "grid" }) x1="0" x2="100%" y1=(y) y2=(y) {}
                    text class="tick" x="-8" y=(y) dy="0.35em" text-anchor="end" { (label) }
                }
                @for incident in self.incidents { (self.incident(incident)) }
                svg width="100%" height=(px(BOTTOM + AXIS)) viewBox=(view) preserveAspectRatio="none" {
                    path class="line" d=(self.line()) {}
                }
                (time_labels(self.times, TOP, BOTTOM))
            }
        }
    }

    fn line(&self) -> String {
        let (mut path, mut pen_is_down) = (String::new(), false);
        for (column, figure) in self.figures.iter().enumerate() {
            if let Some(figure) = figure {
                let to = if pen_is_down { 'L' } else { 'M' };
                // Writing to a String cannot fail.
                let _ = write!(path, "{to}{column}.5 {}", px(self.scale.place(*figure)));
            }
            pen_is_down = figure.is_some();
        }
        path
    }

    fn incident(&self, incident: &Incident) -> Markup {
        let (from, to) = incident.extent;
        html! {
            g class={ "incident" @if incident.is_active { " active" } } {
                title { (incident.words) }
                rect x=(percent(from)) width=(percent((to - from).max(0.002)))
                    y=(px(TOP)) height=(px(BOTTOM - TOP)) {}
            }
        }
    }
}
