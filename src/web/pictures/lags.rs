//! "Do its values follow each other?": correlation of a source's values with those 1, 2, 3 … before,
//! between the lines that chance alone stays within nineteen times of twenty.

use maud::{Markup, html};

use crate::web::format;

use super::scale::{Scale, Spacing};
use super::{percent, px};

/// The question.
pub const TITLE: &str = "Do its values follow each other?";
const TOP: f64 = 10.0;
const BOTTOM: f64 = 170.0;
const AXIS: f64 = 24.0;

/// Draws correlations at lags 1, 2, 3 … with the limit of chance.
pub fn draw(correlations: &[f64], limit: f64, description: &str) -> Markup {
    let sizes = correlations.iter().map(|c| c.abs());
    let size = sizes.fold(limit * 1.5, f64::max).clamp(0.1, 1.0);
    let scale = Scale::new(Spacing::Linear, (-size, size), (TOP, BOTTOM));
    let count = correlations.len().max(1) as f64;
    html! {
        svg class="plot lags" width="100%" height=(px(BOTTOM + AXIS)) role="img"
            aria-labelledby="lags-t" aria-describedby="lags-d" {
            title id="lags-t" { (TITLE) }
            desc id="lags-d" { (description) }
            @for at in [-limit, limit] {
                @let y = px(scale.place(at));
                line class="alpha" x1="0" x2="100%" y1=(y) y2=(y) {}
                text class="tick" x="-8" y=(y) dy="0.35em" text-anchor="end" { (format::plain(at, 2)) }
            }
            @let zero = px(scale.place(0.0));
            line class="zero" x1="0" x2="100%" y1=(zero) y2=(zero) {}
            text class="tick" x="-8" y=(zero) dy="0.35em" text-anchor="end" { "0" }
            @for (at, correlation) in correlations.iter().enumerate() {
                @let x = percent((at as f64 + 0.5) / count);
                @let beyond = correlation.abs() > limit;
                g class="mark" {
                    title { "lag " (at + 1) ": " (format::plain(*correlation, 2)) }
                    line class={ "lag" @if beyond { " beyond" } } x1=(x) x2=(x) y1=(zero)
                        y2=(px(scale.place(*correlation))) {}
                    @if at == 0 || (at + 1).is_multiple_of(5) {
                        text class="tick" x=(x) y=(px(BOTTOM + 19.0)) text-anchor="middle" { (at + 1) }
                    }
                }
            }
        }
    }
}
