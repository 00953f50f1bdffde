//! A bank in one line of the plant's page: a short bar per source in physical order, at the height of
//! its deviation, between the ends of the margin. Named sources are longer and in the accent.

use maud::{Markup, html};

use crate::engine::{BankView, SourceState};

use super::deviations::full_tone;
use super::scale::{Scale, Spacing};
use super::{percent, px};

/// Height of the picture, in pixels.
const HEIGHT: f64 = 56.0;
/// Half the length of a bar.
const HALF: f64 = 7.0;

/// Draws it; readers of text get the same from the words beside it.
pub fn draw(view: &BankView) -> Markup {
    let figures: Vec<f64> = view
        .sources
        .iter()
        .filter_map(|s| s.deviation)
        .map(|d| d.value)
        .collect();
    let full = full_tone(&view.bank, &figures);
    let room = HALF + 2.0;
    let scale = Scale::new(Spacing::Linear, (-full, full), (room, HEIGHT - room));
    let count = view.sources.len().max(1) as f64;
    let middle = px(HEIGHT / 2.0);
    html! {
        svg class={ "mini " (super::row::density(view.sources.len())) } width="100%" height=(px(HEIGHT)) aria-hidden="true" focusable="false" {
            line class="zero" x1="0" x2="100%" y1=(middle) y2=(middle) {}
            @for (at, source) in view.sources.iter().enumerate() {
                @let x = percent((at as f64 + 0.5) / count);
                @match (source.deviation, source.state) {
                    (_, SourceState::Silent | SourceState::Awaited) | (None, _) => {
                        circle class="absent" cx=(x) cy=(middle) r="1.5" {}
                    }
                    (Some(deviation), _) => {
                        @let y = scale.place(deviation.value);
                        @let class = if source.named.is_empty() { "bar" } else { "bar apart" };
                        line class=(class) x1=(x) x2=(x) y1=(px(y - HALF)) y2=(px(y + HALF)) {}
                    }
                }
            }
        }
    }
}
