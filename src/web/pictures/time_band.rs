//! "How did each source stand over time?": sources down, time across, deviation as colour, notices
//! drawn around the sources they name.

use std::collections::BTreeMap;
use std::fmt::Write as _;

use maud::{Markup, html};

use crate::verdict::Digest;

use super::row::rank;
use super::time_axis::TimeAxis;
use super::{percent, px, vik};

/// The question.
pub const TITLE: &str = "How did each source stand over time?";
/// Where the rows begin, in pixels.
const TOP: f64 = 6.0;
/// Room for the time axis.
const AXIS: f64 = 26.0;

/// A notice in the picture.
#[derive(Clone, Debug)]
pub struct Incident {
    /// Rows it names.
    pub rows: Vec<usize>,
    /// Start and end as shares of the picture.
    pub extent: (f64, f64),
    /// Whether its condition still holds.
    pub is_active: bool,
    /// For pointing at it.
    pub words: String,
}

/// What the picture shows.
pub struct TimeBand<'a> {
    /// Time across.
    pub axis: &'a TimeAxis,
    /// Its ticks.
    pub ticks: &'a [(f64, String)],
    /// Names of the sources in physical order.
    pub sources: Vec<&'a str>,
    /// The look of each column.
    pub looks: &'a [Option<&'a Digest>],
    /// Notices.
    pub incidents: Vec<Incident>,
    /// Where the colours are full, in the unit.
    pub full: f64,
    /// The answer in a sentence or two.
    pub description: String,
}

/// Longer names do not fit beside the rows of a usual picture.
const LONG_NAME: usize = 5;
/// Beyond this a name is cut; the table has it whole.
const LONGEST_NAME: usize = 12;

fn short(name: &str) -> String {
    if name.chars().count() <= LONGEST_NAME {
        return name.to_owned();
    }
    let kept: String = name.chars().take(LONGEST_NAME - 1).collect();
    format!("{kept}…")
}

impl TimeBand<'_> {
    /// Whether the names need a broader edge.
    pub fn has_long_names(&self) -> bool {
        self.sources.iter().any(|s| s.chars().count() > LONG_NAME)
    }

    /// Draws it.
    pub fn draw(&self) -> Markup {
        let row = row_height(self.sources.len());
        let body = row * self.sources.len() as f64;
        let columns = self.axis.columns;
        html! {
            svg class={ "plot band rows-" (row as u32) } width="100%" height=(px(TOP + body + AXIS)) role="img"
                aria-labelledby="band-t" aria-describedby="band-d" {
                title id="band-t" { (TITLE) }
                desc id="band-d" { (self.description) }
                defs {
                    pattern id="gap" width="6" height="6" patternUnits="userSpaceOnUse" {
                        path class="gap" d="M0 6L6 0" {}
                    }
                }
                rect x="0" y=(px(TOP)) width="100%" height=(px(body)) fill="url(#gap)" {}
                svg class="cells" x="0" y=(px(TOP)) width="100%" height=(px(body))
                    viewBox={ "0 0 " (columns) " " (px(body)) } preserveAspectRatio="none" {
                    @for (step, path) in self.paths(row) {
                        path stroke=(vik::STEPS.get(step).copied().unwrap_or("none"))
                            stroke-width=(px(row - gap(row))) d=(path) {}
                    }
                }
                @for (at, name) in self.sources.iter().enumerate() {
                    @let named = self.incidents.iter().any(|i| i.is_active && i.rows.contains(&at));
                    text class={ "name " (rank(at)) @if named { " apart" } } x="-8"
                        y=(px(TOP + (at as f64 + 0.5) * row)) dy="0.35em" text-anchor="end" { (short(name)) }
                }
                @for incident in &self.incidents { (draw_incident(incident, row)) }
                (time_labels(self.ticks, TOP, TOP + body))
            }
        }
    }

    /// One path per colour, each a set of horizontal strokes: runs of one colour are one stroke.
    fn paths(&self, row: f64) -> BTreeMap<usize, String> {
        let steps: Vec<BTreeMap<&str, usize>> = self
            .looks
            .iter()
            .map(|look| look.map_or_else(BTreeMap::new, |l| self.steps(l)))
            .collect();
        let mut paths: BTreeMap<usize, String> = BTreeMap::new();
        for (at, name) in self.sources.iter().enumerate() {
            let y = px((at as f64 + 0.5) * row);
            let mut column = 0;
            while let Some(here) = steps.get(column) {
                let step = here.get(name);
                let same = |s: &&BTreeMap<&str, usize>| s.get(name) == step;
                let run = steps.iter().skip(column).take_while(same).count();
                if let Some(step) = step {
                    // Writing to a String cannot fail.
                    let _ = write!(paths.entry(*step).or_default(), "M{column} {y}h{run}");
                }
                column += run.max(1);
            }
        }
        paths
    }

    fn steps<'d>(&self, look: &'d Digest) -> BTreeMap<&'d str, usize> {
        let judged = look
            .deviations
            .iter()
            .filter_map(|(name, d)| Some((&**name, (*d)?)));
        judged
            .map(|(name, d)| (name, vik::step(f64::from(d), self.full)))
            .collect()
    }
}

/// Rows are tall enough for their names while there are few.
fn row_height(sources: usize) -> f64 {
    match sources {
        0..=16 => 20.0,
        17..=32 => 14.0,
        33..=64 => 9.0,
        _ => 6.0,
    }
}

fn gap(row: f64) -> f64 {
    if row >= 14.0 { 2.0 } else { 0.5 }
}

fn draw_incident(incident: &Incident, row: f64) -> Markup {
    let (from, to) = incident.extent;
    let class = if incident.is_active {
        "incident active"
    } else {
        "incident"
    };
    html! {
        g class=(class) {
            title { (incident.words) }
            @for at in &incident.rows {
                @let top = TOP + *at as f64 * row;
                rect x=(percent(from)) width=(percent((to - from).max(0.002)))
                    y=(px(top)) height=(px(row)) {}
            }
        }
    }
}

/// The time axis, shared with the evidence picture.
pub fn time_labels(ticks: &[(f64, String)], top: f64, bottom: f64) -> Markup {
    html! {
        @for (at, (share, label)) in ticks.iter().enumerate() {
            // Where there is little room every second one gives way, never the newest.
            @let class = if (ticks.len() - at).is_multiple_of(2) { "tick odd" } else { "tick" };
            @let x = percent(*share);
            line class="grid time" x1=(x) x2=(x) y1=(px(top)) y2=(px(bottom + 5.0)) {}
            text class=(class) x=(x) y=(px(bottom + 19.0))
                text-anchor=(if *share < 0.04 { "start" } else if *share > 0.96 { "end" } else { "middle" }) {
                (label)
            }
        }
    }
}

/// What the colours mean, in the unit.
pub fn legend(full: f64, unit: &str, figure: impl Fn(f64) -> String) -> Markup {
    let steps = vik::STEPS.len();
    html! {
        figure class="legend" {
            svg class="scale" width="252" height="34" role="img" aria-label={
                "Colour scale from " (figure(-full)) " to " (figure(full)) " " (unit) ", light at zero"
            } {
                @for (at, colour) in vik::STEPS.iter().enumerate() {
                    rect x=(at * 12) y="0" width="12" height="12" fill=(colour) {}
                }
                @for (share, anchor) in [(0.0, "start"), (0.5, "middle"), (1.0, "end")] {
                    text class="tick" x=(px(share * steps as f64 * 12.0)) y="28" text-anchor=(anchor) {
                        (figure((share * 2.0 - 1.0) * full))
                    }
                }
            }
            figcaption {
                (unit) " from the others; the ends also stand for more. "
                svg class="swatch" width="18" height="12" aria-hidden="true" focusable="false" {
                    rect width="18" height="12" fill="url(#gap)" {}
                }
                " no figure"
            }
        }
    }
}
