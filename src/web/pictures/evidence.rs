//! "How unlikely would the looks be if all sources were alike?": p of the deciding tests over time, on
//! a logarithmic scale that rises with the evidence, and the alpha that a look must pass.

use std::fmt::Write as _;

use maud::{Markup, html};

use crate::verdict::{Digest, Finding};

use super::time_axis::TimeAxis;
use super::time_band::time_labels;
use super::{percent, px};

/// The question.
pub const TITLE: &str = "How unlikely would these looks be if all sources were alike?";
const TOP: f64 = 10.0;
const BOTTOM: f64 = 150.0;
/// Room for the time axis.
const AXIS: f64 = 26.0;

/// What the picture shows.
pub struct Evidence<'a> {
    /// Time across.
    pub axis: &'a TimeAxis,
    /// Its ticks.
    pub ticks: &'a [(f64, String)],
    /// The look of each column.
    pub looks: &'a [Option<&'a Digest>],
    /// The answer in a sentence or two.
    pub description: String,
}

impl Evidence<'_> {
    /// Draws it.
    pub fn draw(&self) -> Markup {
        let newest = self.looks.iter().flatten().next_back();
        let alpha = newest.map(|d| d.alpha_level);
        let wall = alpha.map_or(8.0, |a| (decades(a) * 1.7).clamp(4.0, 40.0));
        let y = |p: f64| BOTTOM - (decades(p) / wall).clamp(0.0, 1.0) * (BOTTOM - TOP);
        let step = (wall / 4.0).ceil().max(1.0);
        let marks = (0..=4).map(|i| f64::from(i) * step).filter(|d| *d <= wall);
        html! {
            svg class="plot evidence" width="100%" height=(px(BOTTOM + AXIS)) role="img"
                aria-labelledby="evidence-t" aria-describedby="evidence-d" {
                title id="evidence-t" { (TITLE) }
                desc id="evidence-d" { (self.description) }
                @for d in marks {
                    @let at = px(y(10_f64.powf(-d)));
                    line class=(if d == 0.0 { "zero" } else { "grid" }) x1="0" x2="100%" y1=(at) y2=(at) {}
                    text class="tick" x="-8" y=(at) dy="0.35em" text-anchor="end" {
                        @if d == 0.0 { "1" } @else { "1e−" (d) }
                    }
                }
                @if let Some(alpha) = alpha.filter(|a| *a > 0.0) {
                    @let at = y(alpha);
                    line class="alpha" x1="0" x2="100%" y1=(px(at)) y2=(px(at)) {}
                    text class="margin-label" x="0" dx="6" y=(px(at - 6.0)) {
                        "alpha: a call needs p beyond this line"
                    }
                }
                svg class="lines" x="0" y="0" width="100%" height=(px(BOTTOM + 2.0))
                    viewBox={ "0 0 " (self.axis.columns) " " (px(BOTTOM + 2.0)) } preserveAspectRatio="none" {
                    path class="line spread" d=(self.line(|d| d.spread_p, y)) {}
                    path class="line level" d=(self.line(|d| d.level_p, y)) {}
                }
                (self.calls(y))
                (time_labels(self.ticks, TOP, BOTTOM))
            }
        }
    }

    /// One stroke per run of columns that have a figure.
    fn line(&self, p: impl Fn(&Digest) -> Option<f64>, y: impl Fn(f64) -> f64) -> String {
        let (mut path, mut pen_is_down) = (String::new(), false);
        for (column, look) in self.looks.iter().enumerate() {
            let figure = look.and_then(&p).filter(|p| p.is_finite());
            if let Some(p) = figure {
                let to = if pen_is_down { 'L' } else { 'M' };
                // Writing to a String cannot fail.
                let _ = write!(path, "{to}{column}.5 {}", px(y(p)));
            }
            pen_is_down = figure.is_some();
        }
        path
    }

    /// A diamond on each column whose look found the bank apart.
    fn calls(&self, y: impl Fn(f64) -> f64) -> Markup {
        let columns = self.axis.columns.max(1) as f64;
        let found = self.looks.iter().enumerate().filter_map(|(column, look)| {
            let look = (*look)?;
            let p = match look.finding {
                Finding::LevelApart => look.level_p,
                Finding::SpreadApart => look.spread_p,
                _ => None,
            }?;
            Some(((column as f64 + 0.5) / columns, y(p)))
        });
        html! {
            @for (x, y) in found {
                svg class="held" x=(percent(x)) y=(px(y)) { path class="point" d="M0-4L4 0L0 4L-4 0Z" {} }
            }
        }
    }
}

/// How many powers of ten below one.
fn decades(p: f64) -> f64 {
    if p > 0.0 { -p.log10() } else { 320.0 }
}
