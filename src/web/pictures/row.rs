//! The row picture: sources side by side in physical order, a figure with its interval for each, and
//! the margin as one band. Deviations and spread are both drawn with it.

use maud::{Markup, html};

use crate::verdict::Estimate;

use super::scale::Scale;
use super::{percent, px, vik};

/// One source.
#[derive(Clone, Debug)]
pub struct Mark {
    /// Its name.
    pub name: String,
    /// Its figure; `None` when it could not be judged.
    pub figure: Option<Estimate>,
    /// The word for how it stands apart ("low"), when it is named.
    pub apart: Option<&'static str>,
    /// The figure in words, for pointing at it.
    pub words: String,
    /// Where its figure lies on the colour scale, from -1 to 1.
    pub tone: f64,
}

/// What the picture says.
pub struct Row<'a> {
    /// Distinguishes its parts' ids on the page.
    pub id: &'a str,
    /// The question.
    pub title: &'a str,
    /// The answer in a sentence or two.
    pub description: String,
    /// The sources in physical order.
    pub marks: Vec<Mark>,
    /// The scale.
    pub scale: Scale,
    /// Ticks with their labels.
    pub ticks: Vec<(f64, String)>,
    /// Lines to compare with, with what they are.
    pub lines: Vec<(f64, &'static str)>,
    /// The figure that all would have if they were alike.
    pub even_at: f64,
    /// The band.
    pub band: Option<(f64, f64)>,
    /// Over the axis; empty where ticks say it themselves.
    pub unit: &'a str,
}

/// Top of the plotting area, in pixels.
pub const TOP: f64 = 26.0;
/// Its bottom.
pub const BOTTOM: f64 = 266.0;
/// From here on names are written slanted.
const LONG_NAME: usize = 4;

impl Row<'_> {
    /// Draws it.
    pub fn draw(&self) -> Markup {
        let long = self
            .marks
            .iter()
            .any(|m| m.name.chars().count() > LONG_NAME);
        let height = if long { BOTTOM + 84.0 } else { BOTTOM + 34.0 };
        let (title, desc) = (format!("{}-t", self.id), format!("{}-d", self.id));
        let density = density(self.marks.len());
        html! {
            svg class={ "plot row " (density) } width="100%" height=(px(height)) role="img"
                aria-labelledby=(title) aria-describedby=(desc) {
                title id=(title) { (self.title) }
                desc id=(desc) { (self.description) }
                (self.ground())
                @for (at, mark) in self.marks.iter().enumerate() { (self.mark(at, mark, long)) }
            }
        }
    }

    fn ground(&self) -> Markup {
        html! {
            @if let Some((low, high)) = self.band {
                @let (top, bottom) = (self.scale.place(high), self.scale.place(low));
                rect class="margin" x="0" width="100%" y=(px(top)) height=(px(bottom - top)) {}
            }
            text class="tick" x="-8" y="12" text-anchor="end" { (self.unit) }
            @for (at, label) in &self.ticks {
                @let y = px(self.scale.place(*at));
                @let class = if (at - self.even_at).abs() < 1e-12 { "zero" } else { "grid" };
                line class=(class) x1="0" x2="100%" y1=(y) y2=(y) {}
                text class="tick" x="-8" y=(y) dy="0.35em" text-anchor="end" { (label) }
            }
            @for (at, label) in &self.lines {
                @let y = self.scale.place(*at);
                line class="alpha" x1="0" x2="100%" y1=(px(y)) y2=(px(y)) {}
                text class="margin-label" x="100%" dx="-4" y=(px(y - 4.0)) text-anchor="end" { (label) }
            }
        }
    }

    fn mark(&self, at: usize, mark: &Mark, long: bool) -> Markup {
        let x = percent((at as f64 + 0.5) / self.marks.len() as f64);
        let apart = if mark.apart.is_some() { " apart" } else { "" };
        html! {
            g class={ "mark" (apart) } {
                title { (mark.words) }
                // A broad invisible stroke gives the pointer something to find.
                line class="catch" x1=(x) x2=(x) y1=(px(TOP)) y2=(px(BOTTOM)) {}
                @if let Some(Estimate { value, low, high }) = mark.figure {
                    @let y = self.scale.place(value);
                    line class="interval" x1=(x) x2=(x)
                        y1=(px(self.scale.place(high))) y2=(px(self.scale.place(low))) {}
                    (point(&x, y, mark))
                    @if let Some(word) = mark.apart { (self.tag(at, &x, mark, word)) }
                } @else {
                    text class="none" x=(x) y=(px(self.scale.place(self.even_at))) dy="-6"
                        text-anchor="middle" { "–" }
                }
                (name(&x, &self.name_class(at), &mark.name, long))
            }
        }
    }

    /// The class of a name: how soon it gives way, and whether it stands beside a named source's,
    /// which always stays and needs room.
    fn name_class(&self, at: usize) -> String {
        let near = (self.marks.len() / 40).max(1);
        let is_apart = |other: usize| self.marks.get(other).is_some_and(|m| m.apart.is_some());
        let beside = !is_apart(at) && (at.saturating_sub(near)..=at + near).any(is_apart);
        format!("name {}{}", rank(at), if beside { " beside" } else { "" })
    }

    /// The name and word of a named source, beyond its interval's outer end.
    fn tag(&self, at: usize, x: &str, mark: &Mark, word: &str) -> Markup {
        let Some(Estimate { value, low, high }) = mark.figure else {
            return html! {};
        };
        let above = value >= self.even_at;
        let outer = self.scale.place(if above { high } else { low });
        let y = if above {
            (outer - 9.0).max(12.0)
        } else {
            (outer + 18.0).min(BOTTOM + 12.0)
        };
        let (anchor, shift) = match at {
            0 => ("start", "-8"),
            _ if at + 1 == self.marks.len() => ("end", "8"),
            _ => ("middle", "0"),
        };
        html! {
            text class="tag" x=(x) dx=(shift) y=(px(y)) text-anchor=(anchor) { (mark.name) " " (word) }
        }
    }
}

/// What the signs mean, beside the picture. `band` says how wide the margin is, when there is one.
pub fn key(band: Option<String>) -> Markup {
    html! {
        ul class="key" {
            li {
                svg class="plot" width="14" height="22" aria-hidden="true" focusable="false" {
                    line class="interval" x1="7" x2="7" y1="1" y2="21" {}
                    circle class="point" cx="7" cy="11" r="4.5" fill=(vik::colour(0.0, 1.0)) {}
                }
                "a source with its simultaneous 95 % interval"
            }
            li class="apart" {
                svg class="plot" width="18" height="22" aria-hidden="true" focusable="false" {
                    svg class="held" x="9" y="11" { path class="point" d="M0-8L8 0L0 8L-8 0Z" {} }
                }
                "a named source"
            }
            @if let Some(band) = band {
                li {
                    svg class="plot" width="26" height="14" aria-hidden="true" focusable="false" {
                        rect class="margin" width="26" height="14" {}
                    }
                    (band)
                }
            }
        }
    }
}

/// A round point, or a diamond for a named source.
fn point(x: &str, y: f64, mark: &Mark) -> Markup {
    html! {
        @if mark.apart.is_some() {
            svg class="held" x=(x) y=(px(y)) { path class="point" d="M0-8L8 0L0 8L-8 0Z" {} }
        } @else {
            circle class="point" cx=(x) cy=(px(y)) r="4.5" fill=(vik::colour(mark.tone, 1.0)) {}
        }
    }
}

fn name(x: &str, class: &str, name: &str, long: bool) -> Markup {
    html! {
        @if long {
            svg class="held" x=(x) y=(px(BOTTOM + 14.0)) {
                text class=(class) transform="rotate(-50)" text-anchor="end" dy="0.35em" { (name) }
            }
        } @else {
            text class=(class) x=(x) y=(px(BOTTOM + 24.0)) text-anchor="middle" { (name) }
        }
    }
}

/// How many sources share the width; the style sheet thins names by it.
pub fn density(sources: usize) -> &'static str {
    match sources {
        0..=14 => "few",
        15..=32 => "some",
        33..=64 => "many",
        _ => "crowd",
    }
}

/// Which names stay when there is no room for all: every tenth longest, then fifth, then second.
pub fn rank(at: usize) -> &'static str {
    match at + 1 {
        1 => "r10",
        n if n.is_multiple_of(10) => "r10",
        n if n.is_multiple_of(5) => "r5",
        n if n.is_multiple_of(2) => "r2",
        _ => "r1",
    }
}
