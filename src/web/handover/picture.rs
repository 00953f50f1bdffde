//! Small pictures of a handover: the sources of a bank in physical order, deviation or ratio of standard
//! deviations with its interval. Drawn for paper: no colour carries meaning alone.

use maud::{Markup, html};

use super::SourcePart;

/// Height of the picture, in pixels.
const HEIGHT: f64 = 72.0;
/// Room above and below.
const EDGE: f64 = 6.0;

/// What a picture shows.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Shows {
    /// Deviations about zero.
    Deviation,
    /// Ratios about one, on a logarithmic scale.
    Ratio,
}

impl Shows {
    fn figures(self, source: &SourcePart) -> Option<[f64; 3]> {
        let [value, low, high] = match self {
            Self::Deviation => source.deviation?,
            Self::Ratio => source.sd_ratio?.map(f64::ln),
        };
        let good = [value, low, high].iter().all(|x| x.is_finite());
        good.then_some([value, low, high])
    }
}

/// Draws it; `least` is a half height that is always shown, in the picture's unit (a ratio as it is).
pub fn draw(sources: &[SourcePart], shows: Shows, least: f64, words: &str) -> Markup {
    let figures: Vec<(&SourcePart, Option<[f64; 3]>)> =
        sources.iter().map(|s| (s, shows.figures(s))).collect();
    let least = match shows {
        Shows::Deviation => least,
        Shows::Ratio => least.ln(),
    };
    let ends = figures.iter().filter_map(|(_, f)| *f);
    let full = ends
        .map(|[_, low, high]| low.abs().max(high.abs()))
        .fold(least.abs(), f64::max)
        .max(1e-12);
    let place = |x: f64| HEIGHT / 2.0 - x / full * (HEIGHT / 2.0 - EDGE);
    let count = sources.len().max(1) as f64;
    let px = |x: f64| format!("{x:.1}");
    let middle = px(HEIGHT / 2.0);
    html! {
        svg class="handed" width="100%" height=(px(HEIGHT)) role="img" aria-label=(words) {
            line class="zero" x1="0" x2="100%" y1=(middle) y2=(middle) {}
            @if least > 0.0 {
                @for y in [px(place(least)), px(place(-least))] { line class="bound" x1="0" x2="100%" y1=(y) y2=(y) {} }
            }
            @for (at, (source, figures)) in figures.iter().enumerate() {
                @let x = format!("{:.2}%", (at as f64 + 0.5) / count * 100.0);
                @match figures {
                    None => circle class="absent" cx=(x) cy=(middle) r="1.5" {},
                    Some([value, low, high]) => {
                        line class="reach" x1=(x) x2=(x) y1=(px(place(*low))) y2=(px(place(*high))) {}
                        circle class=(if source.named { "dot apart" } else { "dot" }) cx=(x) cy=(px(place(*value))) r=(if source.named { "4.5" } else { "3" }) {}
                    }
                }
            }
        }
    }
}
