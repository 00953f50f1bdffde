//! The rate of false calls of the likelihood ratio over every start: one stream, then all sources at
//! the worst offsets that the margin allows.
//!
//! A stream is the largest (P_t − P_s)+/√(t − s) over all starts s, P the sum of unit normals less
//! `inside` each. Its crossings come in clusters; a cluster is counted at its highest point over the
//! boundary b √n, n = t − s. There the walk leaves the point with drift o = b/(2 √n) towards the inside
//! of [s, t] and c = o + inside towards the outside, at both ends, and must stay below on all four ways:
//! rate = Σ over n of Φ(−(b + inside √n)) (p(c) p(o))², p of [`super::nu::stays_below`] (the argument of Siegmund
//! and Venkatraman 1995, who give the integral for inside = 0). The sum over whole n matters: with a
//! drift the shortest stretches decide, and the integral from 1 is 1.2 to 3 times too low there. Against
//! 30 million simulated cycles of one stream, b 3.5 to 4.25, inside 0 to 1: rate simulated / rate here
//! 0.90 to 0.96 at inside = 0 and 0.95 to 1.12 above.

use super::nu::stays_below;
use super::solve::falling_root;
use crate::stats::dist::normal;

/// The longest stretch that counts, in cycles: starts further back are dropped by the streams.
const LONGEST: f64 = 1e4;
/// Stretches summed one by one; longer ones by the midpoint rule in ln n.
const SINGLE: u32 = 12;
/// Nodes of that rule: its error is below 1e-3 of the rate.
const NODES: u32 = 14;
/// Thresholds outside this range mean nothing: below, crossings are no rare clusters; above, tails
/// underflow.
const RANGE: (f64, f64) = (1.0, 36.0);
/// Drifts of more sd per cycle than this cannot add to a rate.
const LARGEST_DRIFT: f64 = 8.0;
/// Knots of the table of ln rate against the drift.
const KNOTS: usize = 20;

/// What one stretch adds apart from the drift.
struct Stretch {
    sqrt_n: f64,
    inward: f64,
    weight: f64,
}

/// The rates of streams at one threshold.
pub struct Streams {
    b: f64,
    stretches: Vec<Stretch>,
}

impl Streams {
    /// Streams at the threshold `b`, in sd.
    pub fn new(b: f64) -> Self {
        let first = f64::from(SINGLE) + 0.5;
        let step = ((LONGEST + 0.5) / first).ln() / f64::from(NODES);
        let single = (1..=SINGLE).map(|n| (f64::from(n), 1.0));
        let rest = (0..NODES).map(|i| {
            let n = first * ((f64::from(i) + 0.5) * step).exp();
            (n, n * step)
        });
        let stretches = single.chain(rest).map(|(n, weight)| {
            let inward = b / (2.0 * n.sqrt());
            Stretch {
                sqrt_n: n.sqrt(),
                inward,
                weight: weight * stays_below(inward).powi(2),
            }
        });
        Self {
            b,
            stretches: stretches.collect(),
        }
    }

    /// False calls per cycle of one stream whose mean lies `inside` sd below its reference, 0 or more.
    pub fn rate(&self, inside: f64) -> f64 {
        let mut sum = 0.0;
        for s in &self.stretches {
            let tail = normal::sf(self.b + inside * s.sqrt_n);
            let term = s.weight * tail * stays_below(s.inward + inside).powi(2);
            sum += term;
            // With a drift the terms fall faster than geometrically.
            if inside > 0.5 && term < 1e-9 * sum {
                break;
            }
        }
        sum
    }
}

/// ln rate against the drift, tabulated at one threshold: knots in √drift, cubic in between.
struct RateTable {
    reach: f64,
    ln_rate: Vec<f64>,
}

impl RateTable {
    fn new(streams: &Streams, largest: f64) -> Self {
        let reach = largest.clamp(1e-6, LARGEST_DRIFT);
        let drift = |i: usize| reach * (i as f64 / (KNOTS - 1) as f64).powi(2);
        let ln_rate = (0..KNOTS).map(|i| streams.rate(drift(i)).max(1e-300).ln());
        Self {
            reach,
            ln_rate: ln_rate.collect(),
        }
    }

    fn rate(&self, inside: f64) -> f64 {
        let place = (inside.clamp(0.0, self.reach) / self.reach).sqrt() * (KNOTS - 1) as f64;
        let first = (place as usize).saturating_sub(1).min(KNOTS - 4);
        let x = place - first as f64;
        let [a, b, c, d] = [0, 1, 2, 3].map(|i| self.ln_rate[first + i]);
        let cubic = -a * (x - 1.0) * (x - 2.0) * (x - 3.0) / 6.0
            + b * x * (x - 2.0) * (x - 3.0) / 2.0
            - c * x * (x - 1.0) * (x - 3.0) / 2.0
            + d * x * (x - 1.0) * (x - 2.0) / 6.0;
        cubic.exp()
    }
}

/// The threshold at which `rate_at` (a rate as a function of the streams at a threshold) meets `rate`
/// calls per cycle.
pub fn threshold(rate: f64, rate_at: impl Fn(&Streams) -> f64) -> f64 {
    let goal = rate.ln();
    let start = (2.0 * (1.0 - goal).max(1.0)).sqrt();
    falling_root(RANGE, start, |b| {
        rate_at(&Streams::new(b)).max(1e-300).ln() - goal
    })
}

/// The worst rate of all streams of `sources` sources, two each (one pair of streams in all for two
/// sources, whose residuals mirror each other), over the offsets within a range of `margin_sd`: a group
/// of g stands at the margin above the rest. In units of a residual's sd the margin is m √((k−1)/k), the
/// group lies that times (k−g)/(k−1) above the mean of the others and the rest g/(k−1) below.
pub fn worst_rate(streams: &Streams, sources: usize, margin_sd: f64) -> f64 {
    let k = sources as f64;
    let margin = margin_sd * ((k - 1.0) / k).sqrt();
    if margin <= 0.0 {
        return streams.rate(0.0) * if sources == 2 { 2.0 } else { 2.0 * k };
    }
    let table = RateTable::new(streams, 2.0 * margin);
    let both = |offset: f64| table.rate(margin - offset) + table.rate(margin + offset);
    if sources == 2 {
        return both(margin);
    }
    let group = |g: usize| {
        let g = g as f64;
        let top = margin * (k - g) / (k - 1.0);
        let rest = margin * g / (k - 1.0);
        let tops = if g > 0.0 { g * both(top) } else { 0.0 };
        tops + (k - g) * both(rest)
    };
    (0..=sources / 2).map(group).fold(0.0, f64::max)
}
