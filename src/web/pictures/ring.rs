//! The ring picture: the sources of a rotary machine around it, as seen from above, each as far out or
//! in as it deviates; the margin is one ring.

use std::f64::consts::TAU;

use maud::{Markup, html};

use crate::model::Layout;

use super::row::{Mark, Row, rank};
use super::scale::Scale;
use super::{px, vik};

/// Half the side of the picture.
const HALF: f64 = 170.0;
/// Where the scale ends, from the middle outwards.
const INNER: f64 = 34.0;
/// Room for the names outside.
const OUTER: f64 = 142.0;

/// A row picture in its frame, with the ring beside it where the machine is a rotary one.
pub fn framed(row: &Row<'_>, layout: Layout) -> Markup {
    let ring = Ring {
        id: row.id,
        title: row.title,
        marks: &row.marks,
        scale: row.scale.between(OUTER, INNER),
        even_at: row.even_at,
        band: row.band,
    };
    html! {
        @if layout == Layout::Ring {
            div class="with-ring" { div class="frame" { (row.draw()) } (ring.draw()) }
        } @else {
            div class="frame" { (row.draw()) }
        }
    }
}

/// What the picture shows.
struct Ring<'a> {
    /// Distinguishes its parts' ids on the page.
    id: &'a str,
    /// The question.
    title: &'a str,
    /// The sources in physical order.
    marks: &'a [Mark],
    /// From figures to distances from the middle.
    scale: Scale,
    /// The figure that all would have if they were alike.
    even_at: f64,
    /// The band.
    band: Option<(f64, f64)>,
}

impl Ring<'_> {
    /// Draws it; the row picture's description stands for it too.
    fn draw(&self) -> Markup {
        let (title, side) = (format!("{}-ring-t", self.id), 2.0 * HALF);
        html! {
            svg class={ "plot ring " (super::row::density(self.marks.len())) } width=(px(side)) height=(px(side))
                viewBox={ (px(-HALF)) " " (px(-HALF)) " " (px(side)) " " (px(side)) }
                role="img" aria-labelledby=(title) {
                title id=(title) { (self.title) " As a ring, seen from above; outwards is more." }
                @if let Some((low, high)) = self.band {
                    @let (inner, outer) = (self.scale.place(low), self.scale.place(high));
                    circle class="margin-ring" r=(px(f64::midpoint(inner, outer))) stroke-width=(px(outer - inner)) {}
                }
                circle class="zero-ring" r=(px(self.scale.place(self.even_at))) {}
                @for (at, mark) in self.marks.iter().enumerate() { (self.mark(at, mark)) }
                path class="turn" d="M-7-4L0-11L7-4M0-11V10" {}
            }
        }
    }

    fn mark(&self, at: usize, mark: &Mark) -> Markup {
        let angle = at as f64 / self.marks.len().max(1) as f64 * TAU;
        let (sin, cos) = angle.sin_cos();
        let place = |r: f64| (px(r * sin), px(-r * cos));
        let (name_x, name_y) = place(OUTER + 14.0);
        html! {
            // Around a crowded ring the last name would stand on the first.
            g class={ "mark" @if mark.apart.is_some() { " apart" } @if at + 1 == self.marks.len() { " last" } } {
                title { (mark.words) }
                @if let Some(figure) = mark.figure {
                    @let (x1, y1) = place(self.scale.place(figure.low));
                    @let (x2, y2) = place(self.scale.place(figure.high));
                    @let (x, y) = place(self.scale.place(figure.value));
                    line class="interval" x1=(x1) y1=(y1) x2=(x2) y2=(y2) {}
                    @if mark.apart.is_some() {
                        svg class="held" x=(x) y=(y) { path class="point" d="M0-7L7 0L0 7L-7 0Z" {} }
                    } @else {
                        circle class="point" cx=(x) cy=(y) r="4" fill=(vik::colour(mark.tone, 1.0)) {}
                    }
                }
                text class={ "name " (rank(at)) } x=(name_x) y=(name_y) dy="0.35em" text-anchor="middle" { (mark.name) }
            }
        }
    }
}
