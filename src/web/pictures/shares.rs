//! "Does it scatter like the others?": how a source's values are distributed, before its siblings'.

use std::fmt::Write as _;

use maud::{Markup, html};

use super::{percent, px};

/// The question.
pub const TITLE: &str = "Does it scatter like the others?";
/// Top of the plotting area, in pixels.
const TOP: f64 = 10.0;
/// Its bottom.
const BOTTOM: f64 = 190.0;
/// Room for the axis.
const AXIS: f64 = 26.0;

/// What the picture shows.
pub struct Shares<'a> {
    /// Shares of the source's values in classes of equal width.
    pub own: &'a [f64],
    /// Shares of its siblings'.
    pub others: &'a [f64],
    /// Ticks along the values, as shares of the width.
    pub ticks: Vec<(f64, String)>,
    /// The unit.
    pub unit: &'a str,
    /// The answer in a sentence or two.
    pub description: String,
}

impl Shares<'_> {
    /// Draws it.
    pub fn draw(&self) -> Markup {
        let all = self.own.iter().chain(self.others).copied();
        let largest = all.fold(1e-9, f64::max);
        let y = |share: f64| BOTTOM - share / largest * (BOTTOM - TOP);
        let view = format!("0 0 {} {}", self.own.len(), px(BOTTOM + 1.0));
        html! {
            svg class="plot shares" width="100%" height=(px(BOTTOM + AXIS)) role="img"
                aria-labelledby="shares-t" aria-describedby="shares-d" {
                title id="shares-t" { (TITLE) }
                desc id="shares-d" { (self.description) }
                svg width="100%" height=(px(BOTTOM + 1.0)) viewBox=(view) preserveAspectRatio="none" {
                    path class="siblings" d={ (stairs(self.others, y)) "V" (px(BOTTOM)) "H0Z" } {}
                    path class="line" d=(stairs(self.own, y)) {}
                }
                line class="zero" x1="0" x2="100%" y1=(px(BOTTOM)) y2=(px(BOTTOM)) {}
                @for (share, label) in &self.ticks {
                    @let x = percent(*share);
                    line class="grid" x1=(x) x2=(x) y1=(px(BOTTOM)) y2=(px(BOTTOM + 5.0)) {}
                    text class="tick" x=(x) y=(px(BOTTOM + 19.0)) text-anchor="middle" { (label) }
                }
                text class="tick" x="-8" y=(px(BOTTOM)) dy="0.2em" text-anchor="end" { (self.unit) }
            }
        }
    }
}

fn stairs(shares: &[f64], y: impl Fn(f64) -> f64) -> String {
    let mut path = format!("M0 {}", px(y(0.0)));
    for (at, share) in shares.iter().enumerate() {
        // Writing to a String cannot fail.
        let _ = write!(path, "V{}H{}", px(y(*share)), at + 1);
    }
    let _ = write!(path, "V{}", px(y(0.0)));
    path
}
