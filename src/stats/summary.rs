//! Mean and centred sum of squares, in two passes with compensated sums.
//!
//! The first pass finds a mean to centre on; the second adds deviations and their squares in
//! short blocks whose sums are added with compensation (Knuth 1969, two-sum), and corrects the mean by what the deviations add
//! up to (Chan, Golub and LeVeque 1983, "Algorithms for computing the sample variance"). So the
//! result does not depend on how large the values are compared with their spread, only on how well
//! `f64` holds the values themselves. Where the decimal text is at hand, subtract an origin before
//! rounding; then no digit is lost at all.

use super::Degenerate;

/// Number, mean and centred sum of squares of one source's values.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Summary {
    /// How many values.
    pub n: usize,
    /// Their mean, in the values' unit; NaN for no values.
    pub mean: f64,
    /// Sum of squared deviations from the mean, in the unit squared; 0 for fewer than two values.
    pub ss: f64,
}

const LANES: usize = 8;

/// Values summed plainly before their sum enters the compensated one: a few roundings at most.
const BLOCK: usize = 64;

/// A sum with its rounding errors kept beside it (Knuth's branch-free two-sum).
#[derive(Clone, Copy, Default)]
struct Compensated {
    sum: f64,
    rest: f64,
}

impl Compensated {
    fn add(&mut self, value: f64) {
        let sum = self.sum + value;
        let part = sum - self.sum;
        self.rest += (self.sum - (sum - part)) + (value - part);
        self.sum = sum;
    }

    fn total(&self) -> f64 {
        self.sum + self.rest
    }
}

fn lane_sum(l: [f64; LANES]) -> f64 {
    ((l[0] + l[1]) + (l[2] + l[3])) + ((l[4] + l[5]) + (l[6] + l[7]))
}

/// Summarizes values in their own unit.
///
/// Relative error of `ss` a few units in the last place of what exact arithmetic gives on the same
/// `f64` values. NaN or infinite values give a NaN `mean` and `ss`; no values give a NaN mean and 0.
pub fn summarize(values: &[f64]) -> Summary {
    let Some(&first) = values.first() else {
        return Summary {
            n: 0,
            mean: f64::NAN,
            ss: 0.0,
        };
    };
    let about = summarize_about(values, first);
    Summary {
        mean: first + about.mean,
        ..about
    }
}

/// Summarizes values less `origin`: the mean is relative to it and keeps all its digits.
///
/// `origin` should lie among the values; then the subtraction is exact for values within a factor
/// two of it. Everything else as [`summarize`].
pub fn summarize_about(values: &[f64], origin: f64) -> Summary {
    let n = values.len();
    if n == 0 {
        return Summary {
            n,
            mean: f64::NAN,
            ss: 0.0,
        };
    }
    let centre = rough_mean(values, origin);
    let (mut first, mut second) = (Compensated::default(), Compensated::default());
    for block in values.chunks(BLOCK) {
        let (mut ones, mut twos) = ([0.0; LANES], [0.0; LANES]);
        let (chunks, rest) = block.as_chunks::<LANES>();
        for chunk in chunks {
            for lane in 0..LANES {
                let d = (chunk[lane] - origin) - centre;
                ones[lane] += d;
                twos[lane] += d * d;
            }
        }
        for (lane, value) in rest.iter().enumerate() {
            let d = (value - origin) - centre;
            ones[lane] += d;
            twos[lane] += d * d;
        }
        first.add(lane_sum(ones));
        second.add(lane_sum(twos));
    }
    let shift = first.total() / n as f64;
    let ss = second.total() - shift * shift * n as f64;
    Summary {
        n,
        mean: centre + shift,
        ss: if ss < 0.0 { 0.0 } else { ss },
    }
}

/// A plain mean about the origin, good enough to centre on.
fn rough_mean(values: &[f64], origin: f64) -> f64 {
    let mut sums = [0.0; LANES];
    let (chunks, rest) = values.as_chunks::<LANES>();
    for chunk in chunks {
        for (sum, value) in sums.iter_mut().zip(chunk) {
            *sum += value - origin;
        }
    }
    let tail: f64 = rest.iter().map(|v| v - origin).sum();
    (lane_sum(sums) + tail) / values.len() as f64
}

impl Summary {
    /// Sample variance ss / (n - 1), in the unit squared; none below two values.
    pub fn variance(&self) -> Option<f64> {
        (self.n >= 2).then(|| self.ss / (self.n - 1) as f64)
    }

    /// Sample standard deviation, in the unit; none below two values.
    pub fn sd(&self) -> Option<f64> {
        self.variance().map(f64::sqrt)
    }

    /// Standard error of the mean, sd / sqrt(n); none below two values.
    pub fn std_error(&self) -> Option<f64> {
        self.variance().map(|v| (v / self.n as f64).sqrt())
    }

    /// The summary of both sets of values together (Chan, Golub and LeVeque 1983, eq. 2.1).
    ///
    /// Both means must be relative to the same origin.
    #[must_use]
    pub fn merge(&self, other: &Self) -> Self {
        if self.n == 0 {
            return *other;
        }
        if other.n == 0 {
            return *self;
        }
        let n = self.n + other.n;
        let apart = other.mean - self.mean;
        let share = other.n as f64 / n as f64;
        Self {
            n,
            mean: apart.mul_add(share, self.mean),
            ss: self.ss + other.ss + apart * apart * share * self.n as f64,
        }
    }
}

/// Deviations beyond this size, or all below its inverse, cannot be squared and added safely.
const LARGEST_DEVIATION: f64 = 1e140;

/// Summaries of all groups about one origin, after the checks that every level test shares.
///
/// `needed` is the number of values each group must have.
pub(super) fn checked_summaries(
    groups: &[&[f64]],
    needed: usize,
) -> Result<Vec<Summary>, Degenerate> {
    let origin = check(groups, needed)?;
    Ok(groups.iter().map(|g| summarize_about(g, origin)).collect())
}

/// At least two groups of at least `needed` finite values, not all equal; gives the first value.
pub(super) fn check(groups: &[&[f64]], needed: usize) -> Result<f64, Degenerate> {
    if groups.len() < 2 {
        return Err(Degenerate::FewerThanTwoSources);
    }
    if let Some(source) = groups.iter().position(|g| g.len() < needed.max(1)) {
        return Err(Degenerate::TooFewValues {
            source,
            needed: needed.max(1),
        });
    }
    check_finite(groups)?;
    let origin = groups[0][0];
    let (mut low, mut high) = (origin, origin);
    for group in groups {
        low = group.iter().copied().fold(low, f64::min);
        high = group.iter().copied().fold(high, f64::max);
    }
    spread_in_range(low, high)?;
    Ok(origin)
}

/// Refuses NaN and infinite values.
pub(super) fn check_finite(groups: &[&[f64]]) -> Result<(), Degenerate> {
    let finite = |group: &&[f64]| group.iter().all(|v| v.is_finite());
    if groups.iter().all(finite) {
        Ok(())
    } else {
        Err(Degenerate::NotFinite)
    }
}

/// Refuses values that are all equal or cannot be squared.
pub(super) fn spread_in_range(low: f64, high: f64) -> Result<(), Degenerate> {
    if low == high {
        Err(Degenerate::AllEqual)
    } else if high - low > LARGEST_DEVIATION || high - low < 1.0 / LARGEST_DEVIATION {
        Err(Degenerate::OutOfRange)
    } else {
        Ok(())
    }
}
