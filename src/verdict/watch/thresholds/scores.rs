//! Spread: the rate of false calls of its streams within `spread_margin`.
//!
//! A stream sums normal scores of |e|, e a unit normal when all is well. The deviation is first divided
//! by the margin's ratio (upward) or multiplied by it (downward), so that a source exactly at the margin
//! scores as a standard normal and an even one drifts back. Taking the mean score of such a source from
//! scores of |e| itself, as level does, would leave a source at the ratio 1.5 with the tail of a normal of
//! sd 1.5, against which no threshold of unit steps holds.

use super::starts::Streams;
use crate::stats::dist::normal;
use std::f64::consts::FRAC_1_SQRT_2;

/// Scores are kept within this many sd: beyond, tails underflow.
const LARGEST: f64 = 12.0;
/// Half the width and the step of the quadrature of a mean score: its error is below 1e-6.
const REACH: i32 = 14;
const STEP: f64 = 0.5;

/// Which way a source's spread leaves the others'.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Turn {
    /// Upward: the source turns erratic.
    Erratic,
    /// Downward: the source goes suspiciously quiet.
    Quiet,
}

/// The normal score of |e|: Φ⁻¹(2 Φ(|e|) − 1).
fn score(e: f64) -> f64 {
    let e = e.abs();
    let tail = 2.0 * normal::sf(e);
    let found = if tail < 0.5 {
        normal::isf(tail)
    } else {
        normal::quantile(libm::erf(e * FRAC_1_SQRT_2))
    };
    match found {
        Ok(score) => score.clamp(-LARGEST, LARGEST),
        // |e| of 0 or so large that its tail underflows.
        Err(_) if e > 1.0 => LARGEST,
        Err(_) => -LARGEST,
    }
}

/// The mean score of a source whose sd is `ratio` times the others', in sd per cycle: 0 at the margin,
/// negative inside it.
pub fn mean_step(ratio: f64, spread_margin: f64, turn: Turn) -> f64 {
    match turn {
        Turn::Erratic => mean_score(ratio / spread_margin),
        Turn::Quiet => -mean_score(ratio * spread_margin),
    }
}

/// The mean score of a normal deviation with sd `ratio`; trapezoid rule over the score v that it would
/// have at ratio 1, where the integrand is smooth.
fn mean_score(ratio: f64) -> f64 {
    let node = |i: i32| {
        let v = f64::from(i) * STEP;
        // The |e| whose score is v.
        let e = normal::isf(0.5 * normal::sf(v)).unwrap_or(0.0);
        normal::pdf(v) * score(ratio * e)
    };
    STEP * (-REACH..=REACH).map(node).sum::<f64>()
}

/// How far inside the margin the sources of a bank lie when a group of them stands at it.
pub struct Standing {
    count: f64,
    inside: f64,
}

/// The sets of ratios tried: groups of 0, 1, 2, 4, … up to half the bank stand at the margin's ratio to
/// the rest. Each source is seen against the mean variance of the others, as the margin is of the
/// others' sd, so a group of one stands exactly at the margin.
pub fn standings(sources: usize, spread_margin: f64, turn: Turn) -> Vec<[Standing; 2]> {
    let k = sources as f64;
    let apart = match turn {
        Turn::Erratic => spread_margin * spread_margin,
        Turn::Quiet => 1.0 / (spread_margin * spread_margin),
    };
    let groups = std::iter::successors(Some(1), |g| Some(2 * g)).take_while(|g| 2 * g <= sources);
    let groups = std::iter::once(0).chain(groups);
    let standing = |count: f64, ratio: f64| Standing {
        count,
        inside: (-mean_step(ratio, spread_margin, turn)).max(0.0),
    };
    let of_group = |g: usize| {
        let g = g as f64;
        // The others' variance, as a member of the group and as one of the rest sees it.
        let from_group = ((g - 1.0).max(0.0) * apart + (k - g)) / (k - 1.0);
        let from_rest = (g * apart + (k - g - 1.0)) / (k - 1.0);
        [
            standing(g, (apart / from_group).sqrt()),
            standing(k - g, (1.0 / from_rest).sqrt()),
        ]
    };
    if spread_margin <= 1.0 {
        return vec![[standing(k, 1.0), standing(0.0, 1.0)]];
    }
    groups.map(of_group).collect()
}

/// The worst rate of the one-sided streams over the standings.
pub fn worst_rate(streams: &Streams, standings: &[[Standing; 2]]) -> f64 {
    let part = |s: &Standing| {
        if s.count > 0.0 {
            s.count * streams.rate(s.inside)
        } else {
            0.0
        }
    };
    standings
        .iter()
        .map(|both| both.iter().map(part).sum())
        .fold(0.0, f64::max)
}
