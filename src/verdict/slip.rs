//! Have all sources changed places? Where values are told apart by position modulo k, one lost signal
//! makes every source read as its neighbour, and nobody has moved at all.
//!
//! A slip is seen only by the lasting differences between sources: the places before the start, turned
//! by 1 to k - 1, against those since. Said only when one turn brings back the earlier picture, every
//! other turn and no turn at all do not, and naming sources one by one would take more. Where the
//! sources stood too even before, nobody can tell, and that is said as such.

use serde::{Deserialize, Serialize};

use crate::stats::dist;

use super::level::Level;
use super::parsimony::{DECISIVELY, EVEN_ABOVE, choice, one_by_one, squares};

/// Turns of fewer sources are too few to be told from chance.
const FEWEST: usize = 4;

/// All sources read as another one.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Slip {
    /// Each source reads as the one that stands so many places before it, in physical order and around
    /// from the first to the last; 1 to k - 1.
    pub places: u16,
    /// How well the earlier picture, turned, fits what is read now: the probability of a worse fit.
    pub fit: f64,
}

/// What can be said about a slip.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum SlipFinding {
    /// One turn explains what is read.
    Slipped(Slip),
    /// No turn explains it.
    No,
    /// The sources stood too even before, or more than one turn explains it.
    CannotTell,
}

/// Where each source stands, in physical order, without a place missing.
#[derive(Clone, Debug)]
pub struct Places {
    /// Means in the unit, as read: known offsets not subtracted.
    pub means: Vec<f64>,
    /// Variance of such a mean; 0 where the places are known exactly.
    pub variance: f64,
    /// Degrees of freedom of the variance.
    pub df: f64,
}

impl Places {
    /// As a level shows them; `order` leads from a place to the level's source there, and `offsets` are
    /// those that had been subtracted from these.
    pub fn of(level: &Level, order: &[usize], offsets: &[f64]) -> Self {
        Self {
            means: order.iter().map(|&c| level.means[c] + offsets[c]).collect(),
            variance: level.errors.mean_variance(),
            df: level.errors.df(),
        }
    }
}

/// Whether the places after are those before, turned.
pub fn find(before: &Places, after: &Places) -> SlipFinding {
    let k = after.means.len();
    if k < FEWEST || before.means.len() != k {
        return SlipFinding::No;
    }
    let variance = before.variance + after.variance;
    let df = welch_df(before, after);
    let turned = |places: usize| -> Vec<f64> {
        let each = (0..k).map(|p| after.means[p] - before.means[(p + k - places) % k]);
        centred(each.collect())
    };
    let p = |left: &[f64], variance: f64| {
        let f = squares(left) / variance / (k - 1) as f64;
        dist::f::sf(f, (k - 1) as f64, df).unwrap_or(0.0)
    };
    let stays = turned(0);
    if p(&stays, variance) > EVEN_ABOVE {
        return SlipFinding::No;
    }
    // What every turn of an even picture shows is noise.
    let known = before.variance.max(after.variance);
    if p(&centred(before.means.clone()), known) > EVEN_ABOVE {
        return SlipFinding::CannotTell;
    }
    let fitting: Vec<Slip> = (1..k)
        .map(|places| Slip {
            places: places as u16,
            fit: p(&turned(places), variance),
        })
        .filter(|s| s.fit > EVEN_ABOVE)
        .collect();
    match fitting.as_slice() {
        [] => SlipFinding::No,
        [one] => {
            let left = squares(&turned(usize::from(one.places))) / variance;
            let score = left + choice(k - 1) + DECISIVELY;
            if score < one_by_one(&stays, variance) {
                SlipFinding::Slipped(*one)
            } else {
                SlipFinding::CannotTell
            }
        }
        _ => SlipFinding::CannotTell,
    }
}

fn centred(mut values: Vec<f64>) -> Vec<f64> {
    let mean = values.iter().sum::<f64>() / values.len().max(1) as f64;
    values.iter_mut().for_each(|v| *v -= mean);
    values
}

/// Degrees of freedom of the sum of two variances (Welch and Satterthwaite).
fn welch_df(a: &Places, b: &Places) -> f64 {
    let part = |p: &Places| p.variance * p.variance / p.df.max(1.0);
    let spent = part(a) + part(b);
    let total = a.variance + b.variance;
    if spent > 0.0 {
        (total * total / spent).max(1.0)
    } else {
        f64::INFINITY
    }
}
