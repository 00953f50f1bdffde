//! One stream's evidence over every start at once: the largest ((P_t - P_tau)+)^2 / (t - tau) over all
//! earlier tau, P the running sum of what lies beyond a margin.
//!
//! Must hold: exact among the starts it keeps. The function is convex in (tau, P_tau), so its maximum
//! lies on the lower convex hull of the points; a point above a later one can never win again.
//! The hull is of the sums *before* the margin is taken off: taking it off shears the plane, which moves
//! no vertex, so the margin may change at any time. A vertex costs amortised O(1); about five are left.

use serde::{Deserialize, Serialize};

use crate::verdict::track::Moment;

/// Starts further back than this many cycles are forgotten: what has been there for longer is found by
/// then or is no change.
pub const LONGEST: u64 = 10_000;

/// Times and sums are counted from here anew, so that they keep their digits for ever.
const REBASE_AT: f64 = 65_536.0;

/// A start: what had been summed up before the first value that it counts.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Vertex {
    time: f64,
    sum: f64,
    /// The watch's number of the first cycle that counts.
    pub cycle: u64,
    /// The first value that counts.
    pub at: Moment,
}

/// What values add up to, with every start that may still matter: the lower hull, oldest first.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Rise {
    time: f64,
    sum: f64,
    vertices: Vec<Vertex>,
}

/// Information time and value of one cycle, and when it was.
#[derive(Clone, Copy, Debug)]
pub struct Step {
    /// 1 less the source's share in the mean that it is compared with.
    pub time: f64,
    /// What is summed up.
    pub value: f64,
    /// The watch's number of the cycle.
    pub cycle: u64,
    /// When.
    pub at: Moment,
}

impl Rise {
    /// Takes in one value; beyond `margin` per unit of time it counts.
    #[inline]
    pub fn add(&mut self, step: &Step, margin: f64) {
        self.push(
            Vertex {
                time: self.time,
                sum: self.sum,
                cycle: step.cycle,
                at: step.at,
            },
            margin,
        );
        self.time += step.time;
        self.sum += step.value;
        if self.time > REBASE_AT {
            self.rebase();
        }
    }

    /// Whether some start's statistic lies above `bar`.
    #[inline]
    pub fn exceeds(&self, margin: f64, bar: f64) -> bool {
        self.vertices.iter().any(|v| {
            let n = self.time - v.time;
            let rise = self.sum - v.sum - margin * n;
            rise > 0.0 && rise * rise > bar * n
        })
    }

    /// The largest statistic and its start.
    pub fn best(&self, margin: f64) -> Option<(f64, Vertex)> {
        let by_size = self.statistics(margin);
        by_size.max_by(|a, b| a.0.total_cmp(&b.0))
    }

    /// The statistic of every start that is kept, oldest first.
    pub fn statistics(&self, margin: f64) -> impl Iterator<Item = (f64, Vertex)> + '_ {
        self.vertices.iter().map(move |v| {
            let n = self.time - v.time;
            let rise = (self.sum - v.sum - margin * n).max(0.0);
            (rise * rise / n, *v)
        })
    }

    fn rebase(&mut self) {
        for v in &mut self.vertices {
            v.time -= self.time;
            v.sum -= self.sum;
        }
        (self.time, self.sum) = (0.0, 0.0);
    }

    #[inline]
    fn push(&mut self, new: Vertex, margin: f64) {
        let vertices = &mut self.vertices;
        // By far the most frequent case: the only start that is left lies above the newest one.
        if let [only] = vertices.as_mut_slice()
            && new.sum - only.sum <= margin * (new.time - only.time)
        {
            *only = new;
            return;
        }
        while let [.., a, b] = vertices.as_slice() {
            let before = (b.sum - a.sum) * (new.time - b.time);
            let after = (new.sum - b.sum) * (b.time - a.time);
            if before < after {
                break;
            }
            vertices.pop();
        }
        vertices.push(new);
        // A start at or above a later one, the margin taken off, or too long ago, is of no more use.
        let useless = |w: &[Vertex]| {
            let rise = w[1].sum - w[0].sum - margin * (w[1].time - w[0].time);
            rise <= 0.0 || new.cycle - w[0].cycle > LONGEST
        };
        let gone = vertices.windows(2).take_while(|w| useless(w)).count();
        if gone > 0 {
            vertices.drain(..gone);
        }
    }
}
