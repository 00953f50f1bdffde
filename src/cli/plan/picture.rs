//! The picture "How soon is a drift found?", a file of its own: one source moved, its size across, the
//! time to a call upward in equal ratios, for the budget as configured and its neighbours.
//!
//! Must hold: it can be read alone and without colour (lines differ by their dashes and carry their
//! names); uncertainty is drawn; light paper whatever the reader's setting, since it is printed and mailed.

use std::fmt::Write as _;

use super::Plan;
use super::outcome::{Figure, Outcome, Worth};
use super::scene::Drift;
use super::setting::Variation;
use super::table::time_words;
use super::work::Judged;

const WIDTH: f64 = 760.0;
const HEIGHT: f64 = 460.0;
const LEFT: f64 = 92.0;
const RIGHT: f64 = 560.0;
const TOP: f64 = 84.0;
const BOTTOM: f64 = 388.0;

/// Times that people read, in seconds.
const TICKS_S: [f64; 19] = [
    0.1,
    1.0,
    5.0,
    15.0,
    30.0,
    60.0,
    120.0,
    300.0,
    600.0,
    1_800.0,
    3_600.0,
    14_400.0,
    28_800.0,
    86_400.0,
    259_200.0,
    604_800.0,
    2_592_000.0,
    7_776_000.0,
    31_536_000.0,
];

/// One line of the picture.
struct Curve {
    name: String,
    dash: &'static str,
    width: f64,
    /// Across in the unit, upward in microseconds.
    points: Vec<(f64, Figure)>,
}

/// Draws it.
pub fn draw(plan: &Plan) -> String {
    let curves = curves(plan);
    let scales = Scales::new(plan, &curves);
    let mut svg = head(plan);
    margin(&mut svg, plan, &scales);
    axes(&mut svg, plan, &scales);
    for curve in &curves {
        draw_curve(&mut svg, curve, &scales);
    }
    names(&mut svg, &curves, &scales);
    svg.push_str("</svg>\n");
    svg
}

fn curves(plan: &Plan) -> Vec<Curve> {
    let of = |variation: Variation| {
        plan.judged
            .iter()
            .find(|j| j.setting.variation == variation)
    };
    let mut all = Vec::new();
    if let Some(judged) = of(Variation::AsConfigured) {
        let ninety = points(judged, |o| o.ninety_us);
        all.push(curve(
            "9 in 10 calls, as configured".to_owned(),
            "8 4",
            1.6,
            ninety,
        ));
        let median = points(judged, |o| o.median_us);
        all.push(curve(
            "half the calls, as configured".to_owned(),
            "none",
            2.2,
            median,
        ));
    }
    for (variation, dash) in [
        (Variation::FewerCalls, "2 3"),
        (Variation::MoreCalls, "1 5"),
    ] {
        if let Some(judged) = of(variation) {
            let name = format!("half, {}", judged.setting.words());
            all.push(curve(name, dash, 1.3, points(judged, |o| o.median_us)));
        }
    }
    all
}

fn curve(name: String, dash: &'static str, width: f64, points: Vec<(f64, Figure)>) -> Curve {
    Curve {
        name,
        dash,
        width,
        points,
    }
}

fn points(judged: &Judged, pick: impl Fn(&Outcome) -> Option<Figure>) -> Vec<(f64, Figure)> {
    let one = judged.tried.iter().filter(|t| t.scene.drift == Drift::One);
    one.filter_map(|t| Some((t.scene.size, pick(t.outcome.as_ref()?)?)))
        .collect()
}

/// From figures to places.
struct Scales {
    most: f64,
    low: f64,
    high: f64,
}

impl Scales {
    fn new(plan: &Plan, curves: &[Curve]) -> Self {
        let points = || curves.iter().flat_map(|c| &c.points);
        let sizes = points().map(|p| p.0);
        let most = sizes.fold(plan.bank.margin + plan.assumed.sd, f64::max) * 1.06;
        let times = || points().map(|p| p.1.value.max(1.0));
        let fastest = times().fold(f64::INFINITY, f64::min);
        let slowest = times().fold(0.0, f64::max);
        let one = plan.assumed.interval_us as f64;
        let low = if fastest.is_finite() { fastest } else { one };
        Self {
            most,
            low: (low / 1.6).max(1.0).ln(),
            high: (slowest.max(low * 4.0) * 1.6).ln(),
        }
    }

    fn x(&self, size: f64) -> f64 {
        LEFT + (RIGHT - LEFT) * (size / self.most).clamp(0.0, 1.0)
    }

    fn y(&self, us: f64) -> f64 {
        let share = (us.max(1.0).ln() - self.low) / (self.high - self.low);
        BOTTOM - (BOTTOM - TOP) * share.clamp(0.0, 1.0)
    }

    fn ticks_us(&self) -> Vec<f64> {
        let inside = |us: &f64| (self.low..=self.high).contains(&us.ln());
        TICKS_S
            .map(|s| s * 1e6)
            .into_iter()
            .filter(inside)
            .collect()
    }

    /// Round sizes, about six of them.
    fn sizes(&self) -> (Vec<f64>, usize) {
        let rough = self.most / 6.0;
        let power = 10_f64.powf(rough.log10().floor());
        let steps = [1.0, 2.0, 5.0, 10.0].map(|m| m * power);
        let step = steps.into_iter().find(|s| *s >= rough).unwrap_or(rough);
        let places = (-step.log10().floor()).clamp(0.0, 9.0) as usize;
        let count = (self.most / step) as usize;
        ((0..=count).map(|i| i as f64 * step).collect(), places)
    }
}

fn head(plan: &Plan) -> String {
    let (bank, assumed) = (&plan.bank, &plan.assumed);
    let unit = &bank.characteristic.unit;
    let worth = plan.judged.iter().flat_map(|j| &j.tried);
    let bound = worth
        .filter_map(|t| t.outcome.as_ref())
        .any(|o| o.worth == Worth::Bound);
    let worth = if bound {
        "at the latest"
    } else {
        "simulated; bars: one standard error"
    };
    let about = format!(
        "{}: {} sources, sd {} {unit}, margin {} {unit}, false calls {} ({worth})",
        bank.name,
        assumed.sources,
        bank.characteristic.mean(assumed.sd),
        bank.margin,
        bank.budget
    );
    let description = format!(
        "Across, by how many {unit} one source is off; upward, on a scale of equal ratios, the time until \
         it is called. Lines for the budget as configured and for ten times and a tenth of it. {about}"
    );
    let mut svg = format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" viewBox=\"0 0 {WIDTH} {HEIGHT}\" width=\"{WIDTH}\" \
         height=\"{HEIGHT}\" role=\"img\" aria-labelledby=\"title description\" font-family=\"system-ui, \
         sans-serif\" font-size=\"13\" fill=\"#1d2326\">\n\
         <title id=\"title\">How soon is a drift found?</title>\n<desc id=\"description\">{}</desc>\n\
         <rect width=\"100%\" height=\"100%\" fill=\"#fbfaf7\"/>\n",
        escape(&description)
    );
    text(
        &mut svg,
        (24.0, 34.0),
        "font-size=\"19\" font-weight=\"600\"",
        "How soon is a drift found?",
    );
    text(&mut svg, (24.0, 56.0), "fill=\"#555e63\"", &about);
    svg
}

fn margin(svg: &mut String, plan: &Plan, scales: &Scales) {
    if plan.bank.margin <= 0.0 {
        return;
    }
    let edge = scales.x(plan.bank.margin);
    let _ = writeln!(
        svg,
        "<rect x=\"{LEFT}\" y=\"{TOP}\" width=\"{:.1}\" height=\"{}\" fill=\"#ece9e1\"/>",
        edge - LEFT,
        BOTTOM - TOP
    );
    let what = "text-anchor=\"middle\" fill=\"#555e63\"";
    text(svg, (0.5 * (LEFT + edge), TOP + 18.0), what, "margin");
}

fn axes(svg: &mut String, plan: &Plan, scales: &Scales) {
    let unit = &plan.bank.characteristic.unit;
    for us in scales.ticks_us() {
        let y = scales.y(us);
        line(svg, (LEFT, y), (RIGHT, y), "stroke=\"#d9d6cd\"");
        let words = time_words(us).replace(".0 ", " ");
        text(svg, (LEFT - 8.0, y + 4.0), "text-anchor=\"end\"", &words);
    }
    let (sizes, places) = scales.sizes();
    for size in sizes {
        let x = scales.x(size);
        line(svg, (x, BOTTOM), (x, BOTTOM + 5.0), "stroke=\"#1d2326\"");
        let words = format!("{size:.places$}");
        text(svg, (x, BOTTOM + 20.0), "text-anchor=\"middle\"", &words);
    }
    line(svg, (LEFT, BOTTOM), (RIGHT, BOTTOM), "stroke=\"#1d2326\"");
    let across = format!("one source is off by … {unit}");
    let middle = 0.5 * (LEFT + RIGHT);
    text(
        svg,
        (middle, BOTTOM + 44.0),
        "text-anchor=\"middle\"",
        &across,
    );
    text(svg, (24.0, TOP - 8.0), "", "time to the call");
}

fn draw_curve(svg: &mut String, curve: &Curve, scales: &Scales) {
    let places: Vec<String> = curve
        .points
        .iter()
        .map(|(size, f)| format!("{:.1},{:.1}", scales.x(*size), scales.y(f.value)))
        .collect();
    let _ = writeln!(
        svg,
        "<polyline points=\"{}\" fill=\"none\" stroke=\"#1d2326\" stroke-width=\"{}\" \
         stroke-dasharray=\"{}\"/>",
        places.join(" "),
        curve.width,
        curve.dash
    );
    for (size, figure) in &curve.points {
        let x = scales.x(*size);
        let low = scales.y(figure.value - figure.error);
        let high = scales.y(figure.value + figure.error);
        line(svg, (x, low), (x, high), "stroke=\"#1d2326\"");
        let _ = writeln!(
            svg,
            "<circle cx=\"{x:.1}\" cy=\"{:.1}\" r=\"2.6\" fill=\"#1d2326\"/>",
            scales.y(figure.value)
        );
    }
}

/// The lines' names at their right ends, moved apart where they would touch.
fn names(svg: &mut String, curves: &[Curve], scales: &Scales) {
    const APART: f64 = 17.0;
    let end = |c: &&Curve| c.points.last().map(|(_, f)| scales.y(f.value));
    let mut ends: Vec<(f64, &Curve)> = curves.iter().filter_map(|c| Some((end(&c)?, c))).collect();
    ends.sort_by(|a, b| a.0.total_cmp(&b.0));
    let lift = (ends.len() as f64 * APART - (BOTTOM - TOP)).max(0.0);
    let mut next = TOP - lift;
    for (y, _) in &mut ends {
        *y = y.max(next);
        next = *y + APART;
    }
    // What was pushed below the axis goes back up, with those above it.
    let mut most = BOTTOM;
    for (y, curve) in ends.iter().rev() {
        let at = y.min(most);
        most = at - APART;
        text(
            svg,
            (RIGHT + 10.0, at + 4.0),
            "font-size=\"12\"",
            &curve.name,
        );
    }
}

fn line(svg: &mut String, from: (f64, f64), to: (f64, f64), what: &str) {
    let _ = writeln!(
        svg,
        "<line x1=\"{:.1}\" y1=\"{:.1}\" x2=\"{:.1}\" y2=\"{:.1}\" {what}/>",
        from.0, from.1, to.0, to.1
    );
}

fn text(svg: &mut String, at: (f64, f64), what: &str, words: &str) {
    let _ = writeln!(
        svg,
        "<text x=\"{:.1}\" y=\"{:.1}\" {what}>{}</text>",
        at.0,
        at.1,
        escape(words)
    );
}

/// Text as XML takes it.
fn escape(text: &str) -> String {
    let mut safe = String::with_capacity(text.len());
    for c in text.chars() {
        match c {
            '&' => safe.push_str("&amp;"),
            '<' => safe.push_str("&lt;"),
            '>' => safe.push_str("&gt;"),
            '"' => safe.push_str("&quot;"),
            other => safe.push(other),
        }
    }
    safe
}
