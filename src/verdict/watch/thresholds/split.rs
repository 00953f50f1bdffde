//! Many sources moved: the quantile of the split contrast at the worst offsets that the margin allows.
//!
//! With a group of g at the margin above the rest, the split of a from the group and c from the rest
//! against all others has its mean m (c/t + (g−a)/(k−t)) short of the margin, t = a + c; the union bound
//! adds all splits. It is compared with the chi-square quantile (the squared contrast is part of the sum
//! of squares), and the smaller is taken: with few splits near the margin the union bound, else
//! chi-square.

use super::tails::ln_sf;
use crate::stats::dist::{chi_square, f, normal};

/// Groups tried before the best is refined.
const GROUPS: usize = 12;
/// ln of the share of the largest below which terms are left out: the bound then lacks less than 1 %,
/// 0.002 in z.
const LN_SMALL: f64 = -7.5;
/// Thresholds are solved to this many sd.
const ACCURACY: f64 = 1e-4;

/// The sum of squares' quantile over `sources` at the tail probability `alpha`: chi-square, F for a finite
/// `df` of sigma.
pub fn squares(alpha: f64, sources: usize, df: f64) -> f64 {
    let free = (sources.max(2) - 1) as f64;
    let found = if df.is_finite() {
        f::isf(alpha, free, df).map(|q| q * free)
    } else {
        chi_square::isf(alpha, free)
    };
    // Unreachable for alpha in (0, 1/2]; a wide bound on the safe side.
    found.unwrap_or(2.0 * free + 80.0)
}

/// Where a union bound meets its tail probability.
#[derive(Clone, Copy, Debug)]
pub struct Root {
    z: f64,
    /// Minus the slope of the bound's logarithm in z.
    steepness: f64,
}

impl Root {
    /// The root when the tail probability is exp(`ln_change`) times as large. Linear in the logarithm:
    /// within 0.002 for a change by a factor 1.5.
    pub fn moved(self, ln_change: f64) -> f64 {
        self.z - ln_change / self.steepness
    }
}

/// One bank's split contrast at one tail probability, window after window.
pub struct Split {
    /// ln n! for n up to the number of sources.
    ln_factorial: Vec<f64>,
    sources: usize,
    /// The worst group so far: it moves little from one window to the next.
    group: Option<usize>,
}

impl Split {
    /// For this many sources, 2 or more.
    pub fn new(sources: usize) -> Self {
        let mut ln_factorial = vec![0.0; sources + 1];
        for n in 1..=sources {
            ln_factorial[n] = ln_factorial[n - 1] + (n as f64).ln();
        }
        Self {
            ln_factorial,
            sources,
            group: None,
        }
    }

    /// The root of the squared contrast at which the union bound of the worst group is `alpha`, sigma
    /// known, `reach` being m √n/sigma of the window; none when it is above `ceiling`.
    pub fn union(&mut self, alpha: f64, reach: f64, ceiling: f64) -> Option<Root> {
        let goal = alpha.ln();
        let mut group = self.worst_group(ceiling, reach, goal);
        let (mut z, mut steepness) = (ceiling, ceiling);
        for _ in 0..20 {
            let (value, slope) = self.ln_bound(z, reach, group);
            if z == ceiling && value > goal {
                return None;
            }
            // The bound is log-concave in z: Newton's steps from above fall short and from below pass
            // over it, so the floor of one single split keeps them in place.
            let floor = normal::isf(alpha).unwrap_or(0.0);
            let next = (z + (value - goal) / slope).clamp(floor.min(ceiling), ceiling);
            steepness = slope;
            let done = (next - z).abs() < ACCURACY;
            z = next;
            if done {
                let worse = self.worst_group(z, reach, f64::INFINITY);
                if worse == group {
                    break;
                }
                group = worse;
            }
        }
        Some(Root { z, steepness })
    }

    /// The group whose union bound at `z` is largest: the first time over a grid, then by steps from the
    /// last. Any group whose ln bound is above `enough` will do.
    fn worst_group(&mut self, z: f64, reach: f64, enough: f64) -> usize {
        let half = self.sources / 2;
        let value = |g: usize| self.ln_bound(z, reach, g).0;
        let mut step = half.div_ceil(GROUPS);
        let (mut best, mut most) = match self.group {
            Some(group) => (group, value(group)),
            None => {
                let grid = (1..=half).step_by(step).chain([half]);
                let valued = grid.map(|g| (g, value(g)));
                valued.fold(
                    (half, f64::NEG_INFINITY),
                    |a, b| if b.1 > a.1 { b } else { a },
                )
            }
        };
        while most <= enough {
            let around = [best.saturating_sub(step).max(1), (best + step).min(half)];
            let valued = around.map(|g| (g, if g == best { most } else { value(g) }));
            let better = if valued[0].1 > valued[1].1 {
                valued[0]
            } else {
                valued[1]
            };
            if better.1 > most {
                (best, most) = better;
            } else if step == 1 {
                break;
            } else {
                step = step.div_ceil(2);
            }
        }
        self.group = Some(best);
        best
    }

    /// ln of the union bound at `z` over all splits, with a group of `group` at the margin, and minus its
    /// slope in z. Terms are log-concave in both counts: they are summed from the largest outward, in
    /// strides where they change slowly.
    fn ln_bound(&self, z: f64, reach: f64, group: usize) -> (f64, f64) {
        let at = Vertex {
            split: self,
            z,
            reach,
            group,
        };
        let (mut out, mut taken) = (0, 0);
        // The largest term, by ascent in one count after the other.
        loop {
            let before = (out, taken);
            out = peak(out, group, |o| at.ln_term(o, taken));
            taken = peak(taken, self.sources - group, |t| at.ln_term(out, t));
            if (out, taken) == before {
                break;
            }
        }
        let largest = at.ln_term(out, taken);
        let mut row_peak = taken;
        let mut total = Sum::default();
        let stride = stride(out, group, |o| at.ln_term(o, taken));
        for up in [true, false] {
            let mut o = out;
            loop {
                if up || o != out {
                    row_peak = peak(row_peak, self.sources - group, |t| at.ln_term(o, t));
                    let row = at.row(o, row_peak, largest, stride as f64);
                    total.add(row);
                    if row.value <= total.value * LN_SMALL.exp() {
                        break;
                    }
                }
                match next(o, stride, group, up) {
                    Some(further) => o = further,
                    None => break,
                }
            }
            row_peak = taken;
        }
        (largest + total.value.ln(), total.slope / total.value)
    }

    fn ln_choose(&self, n: usize, r: usize) -> f64 {
        self.ln_factorial[n] - self.ln_factorial[r] - self.ln_factorial[n - r]
    }
}

/// A sum of terms over the largest, and the same weighted with minus their ln slope in z.
#[derive(Clone, Copy, Default)]
struct Sum {
    value: f64,
    slope: f64,
}

impl Sum {
    fn add(&mut self, other: Self) {
        self.value += other.value;
        self.slope += other.slope;
    }
}

/// The splits of one bank with one group at the margin.
struct Vertex<'a> {
    split: &'a Split,
    z: f64,
    reach: f64,
    group: usize,
}

impl Vertex<'_> {
    /// The z that a split needs which leaves `out` of the group out and takes `taken` of the rest.
    fn needed(&self, out: usize, taken: usize) -> f64 {
        let (k, t) = (self.split.sources, self.group - out + taken);
        if t == 0 || t == k {
            return f64::INFINITY;
        }
        let (t, k) = (t as f64, k as f64);
        let short = taken as f64 * ((k - t) / (k * t)).sqrt();
        let missed = out as f64 * (t / (k * (k - t))).sqrt();
        self.z + self.reach * (short + missed)
    }

    /// ln of what such splits add to the bound.
    fn ln_term(&self, out: usize, taken: usize) -> f64 {
        let rest = self.split.sources - self.group;
        let splits = self.split.ln_choose(self.group, out) + self.split.ln_choose(rest, taken);
        splits + ln_sf(self.needed(out, taken))
    }

    /// The splits with `out` left out, each standing for `width`, from the largest outward.
    fn row(&self, out: usize, top: usize, largest: f64, width: f64) -> Sum {
        let rest = self.split.sources - self.group;
        let stride = stride(top, rest, |t| self.ln_term(out, t));
        let least = self.ln_term(out, top) + LN_SMALL;
        let mut sum = Sum::default();
        for up in [true, false] {
            let mut taken = top;
            loop {
                let ln_term = self.ln_term(out, taken);
                if ln_term < least || ln_term == f64::NEG_INFINITY {
                    break;
                }
                if up || taken != top {
                    let value = (ln_term - largest).exp() * width * stride as f64;
                    // The hazard of the normal, to within 1 % beyond 3.
                    let z = self.needed(out, taken).max(1.0);
                    sum.add(Sum {
                        value,
                        slope: value * (z + 1.0 / z),
                    });
                }
                match next(taken, stride, rest, up) {
                    Some(further) => taken = further,
                    None => break,
                }
            }
        }
        sum
    }
}

/// The next count in one direction; none beyond 0 and `most`.
fn next(count: usize, stride: usize, most: usize, up: bool) -> Option<usize> {
    if up {
        Some(count + stride).filter(|c| *c <= most)
    } else {
        count.checked_sub(stride)
    }
}

/// The count in 0..=`most` at which a log-concave `ln_term` is largest, by doubling steps from `from`.
fn peak(from: usize, most: usize, ln_term: impl Fn(usize) -> f64) -> usize {
    let (mut best, mut value) = (from, ln_term(from));
    let mut step = 1;
    loop {
        let mut moved = false;
        for up in [true, false] {
            while let Some(further) = next(best, step, most, up) {
                let there = ln_term(further);
                if there <= value {
                    break;
                }
                (best, value, moved) = (further, there, true);
                step *= 2;
            }
        }
        if !moved && step == 1 {
            return best;
        }
        step = (step / 2).max(1);
    }
}

/// How many counts one term may stand for about a peak: the trapezoid rule on a bell of sd s is exact to
/// 1e-3 with a step of 1.2 s; 1 at an end of the range, where the sum is one-sided.
fn stride(peak: usize, most: usize, ln_term: impl Fn(usize) -> f64) -> usize {
    if peak == 0 || peak >= most {
        return 1;
    }
    let bend = 2.0 * ln_term(peak) - ln_term(peak - 1) - ln_term(peak + 1);
    let sd = 1.0 / bend.max(1e-6).sqrt();
    let room = peak.min(most - peak) as f64;
    // An end within reach of the bell would cut it off: then every count.
    if room < 3.8 * sd {
        1
    } else {
        (1.2 * sd).max(1.0) as usize
    }
}
