//! One source against the others over time: since when it is apart, by how much, and whether there
//! is evidence that it came back.
//!
//! Works on the contrast series: the source's value less the mean of its reference in the same cycle
//! (or, unpaired, less the mean of the reference's values).

use crate::model::{SourceIx, Time};
use crate::stats::{self, dist};

use super::data::{Data, Rows, Values};
use super::look::Estimate;
use super::steps::without_step;

/// In which respect a source is apart.
#[derive(
    Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, serde::Serialize, serde::Deserialize,
)]
pub enum Aspect {
    /// Its mean.
    Level,
    /// Its standard deviation.
    Spread,
}

/// What a source is compared with, and how that is paid for.
#[derive(Clone, Copy, Debug)]
pub struct Yardstick<'a> {
    /// The sources it is compared with.
    pub reference: &'a [SourceIx],
    /// The largest difference (level, in the unit) or ratio of sds (spread) that does not matter.
    pub margin: f64,
    /// By how much dependence enlarges variances.
    pub factor: f64,
    /// How many sources share the simultaneous intervals.
    pub family: usize,
}

/// A start and a size.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Located {
    /// The most likely start.
    pub start: Moment,
    /// The earliest that the data allow at 95 %.
    pub earliest: Moment,
    /// The latest.
    pub latest: Moment,
    /// Deviation (level) or ratio of sds (spread) since the start.
    pub size: Estimate,
    /// Probability of as strong a sign of a change anywhere in the values, by the union bound over
    /// starts, directions and sources.
    pub p: f64,
}

/// A value's place in the order, and when it was taken.
#[derive(Clone, Copy, Debug, PartialEq, Eq, serde::Serialize, serde::Deserialize)]
pub struct Moment {
    /// Cycle, slot, or microseconds taken: the window's order.
    pub place: i64,
    /// When it was taken.
    pub taken: Time,
}

/// Starts whose statistic lies within this of the maximum belong to the 95 % set (found by
/// simulation for the maximum over all starts; twice a log likelihood ratio).
const SET_95: f64 = 7.35;

/// A source that scatters less than this share of the others does not scatter at all.
pub const STILL: f64 = 0.01;

/// Evidence of a return has at least this many values.
const FEWEST_TO_CLEAR: f64 = 5.0;

/// A lasting change of level shows only in the stretch it happens in.
const STRETCH: usize = 50;

/// With fewer stretches one that holds a step would weigh too much.
const FEWEST_STRETCHES: usize = 6;

/// Fewest values behind a size.
const FEWEST: usize = 2;

/// Where and how far a source left its reference. `None` when nothing points to a start in the values.
pub fn locate(data: &Data, source: SourceIx, aspect: Aspect, yard: &Yardstick) -> Option<Located> {
    let series = Series::of(data, source, yard.reference)?;
    let statistics = match aspect {
        Aspect::Level => level_statistics(&series, yard),
        Aspect::Spread => spread_statistics(&series, yard),
    };
    let (best, top) = statistics
        .iter()
        .copied()
        .enumerate()
        .max_by(|a, b| a.1.total_cmp(&b.1))
        .filter(|(_, top)| *top > 0.0)?;
    let within = |s: &f64| *s >= top - SET_95;
    let first = statistics.iter().position(within).unwrap_or(best);
    let last = statistics.iter().rposition(within).unwrap_or(best);
    Some(Located {
        start: series.moments[best],
        earliest: series.moments[first],
        latest: series.moments[last],
        size: series.size(best, aspect, yard)?,
        p: (2 * statistics.len() * yard.family) as f64 * dist::normal::sf(top.sqrt()),
    })
}

/// The size of a known incident on the values since its start.
pub fn size_since(
    data: &Data,
    source: SourceIx,
    aspect: Aspect,
    yard: &Yardstick,
    from: i64,
) -> Option<Estimate> {
    let series = Series::of(data, source, yard.reference)?;
    let first = series.moments.partition_point(|m| m.place < from);
    series.size(first, aspect, yard)
}

/// Evidence that a source is even again, from values after the place `from` alone: where the newest
/// stretch that proves it begins. Two-sided and never from silence.
pub fn returned(
    data: &Data,
    source: SourceIx,
    aspect: Aspect,
    yard: &Yardstick,
    from: i64,
) -> Option<Moment> {
    let series = Series::of(data, source, yard.reference)?;
    let first = series.moments.partition_point(|m| m.place <= from);
    let sigma = series.sigma();
    if sigma.is_nan() || sigma <= 0.0 {
        return None;
    }
    let bar = Bar::of(aspect, yard, sigma);
    let held = series.values.len() - first;
    let mut length = bar.shortest;
    while length.ceil() as usize <= held {
        let start = series.values.len() - length.ceil() as usize;
        if bar.is_cleared(&series, start, sigma, aspect, yard) {
            return Some(series.moments[start]);
        }
        length *= 1.2;
    }
    None
}

/// A full return takes this much longer than without noise (simulated: 56 for 46, 210 for 161).
const NOISE_ON_TOP: f64 = 1.3;

/// Values that a full return takes to prove, as [`returned`] judges, for a within-source sd `sigma`.
pub fn values_to_clear(aspect: Aspect, yard: &Yardstick, sigma: f64) -> f64 {
    Bar::of(aspect, yard, sigma.max(f64::MIN_POSITIVE)).shortest * NOISE_ON_TOP
}

/// The margin with which a source is watched after it cleared, in the unit: at least a quarter of a
/// standard deviation, or it would be called again and again for what it was cleared with.
pub fn cleared_margin(margin: f64, sigma: f64) -> f64 {
    margin.max(SMALLEST_HALF_WIDTH * sigma)
}

const SMALLEST_HALF_WIDTH: f64 = 0.25;

/// How much evidence clearing asks for.
struct Bar {
    /// Half-width of evenness on the contrast's scale (unit, or logarithm of a ratio).
    half_width: f64,
    /// Standard errors that must lie between the contrast and the half-width.
    errors: f64,
    /// Shortest stretch, in values.
    shortest: f64,
}

impl Bar {
    fn of(aspect: Aspect, yard: &Yardstick, sigma: f64) -> Self {
        let (half_width, per_value) = match aspect {
            Aspect::Level => (cleared_margin(yard.margin, sigma), sigma * sigma),
            // Variance of the logarithm of a normal sample's sd is 1/(2 n).
            Aspect::Spread => (yard.margin.ln(), 0.5),
        };
        let errors = standard_errors(half_width / per_value.sqrt());
        let shortest = errors * errors * per_value * yard.factor / (half_width * half_width);
        Self {
            half_width,
            errors,
            shortest: shortest.max(FEWEST_TO_CLEAR),
        }
    }

    fn is_cleared(
        &self,
        series: &Series,
        start: usize,
        sigma: f64,
        aspect: Aspect,
        yard: &Yardstick,
    ) -> bool {
        let Some((contrast, own)) = series.contrast(start, aspect, yard) else {
            return false;
        };
        let n = (series.values.len() - start) as f64;
        // A handful of values often scatters little or much by chance: never believe less than the whole
        // series' sd, and more only beyond two standard errors of a variance.
        let (own, known) = match aspect {
            Aspect::Level => {
                let believed = (1.0 - 2.0 * (2.0 / n).sqrt()).max(0.0);
                let known = sigma * sigma / n + series.reference_error + series.usual_error;
                (own * believed.sqrt(), (known * yard.factor).sqrt())
            }
            Aspect::Spread => (own, 0.0),
        };
        (self.half_width - contrast.abs()) / own.max(known) >= self.errors
    }
}

/// Standard errors by half-width in sd: chosen by simulation so that a source still off by 1.2
/// half-widths is wrongly cleared with probability at most 5 % within 5 000 cycles.
fn standard_errors(half_width_sd: f64) -> f64 {
    const KNOTS: [(f64, f64); 3] = [(0.25, 3.17), (0.5, 3.40), (1.0, 3.56)];
    let x = half_width_sd.clamp(KNOTS[0].0, KNOTS[2].0);
    let (a, b) = if x < KNOTS[1].0 {
        (KNOTS[0], KNOTS[1])
    } else {
        (KNOTS[1], KNOTS[2])
    };
    a.1 + (b.1 - a.1) * (x / a.0).ln() / (b.0 / a.0).ln()
}

/// The contrast series of a source.
struct Series {
    moments: Vec<Moment>,
    values: Vec<f64>,
    /// The reference's own variance (per source, pooled) and how many sources it averages.
    reference_variance: f64,
    reference_share: f64,
    /// Variance of the reference's mean, where it is one number for the whole series.
    reference_error: f64,
    /// What the usual places add to the variance of the contrast, where they were learnt.
    usual_error: f64,
}

impl Series {
    fn of(data: &Data, source: SourceIx, reference: &[SourceIx]) -> Option<Self> {
        let column = data.column_of(source)?;
        let others: Vec<usize> = reference
            .iter()
            .filter(|s| **s != source)
            .filter_map(|s| data.column_of(*s))
            .collect();
        if others.is_empty() {
            return None;
        }
        let mut series = match &data.values {
            Values::Paired(rows) => {
                let each = (0..rows.len()).filter_map(|r| {
                    let row = rows.row(r);
                    let moment = Moment {
                        place: rows.place(r),
                        taken: rows.taken(r),
                    };
                    let mean = mean_of_present(&others, row)?;
                    (!row[column].is_nan()).then(|| (moment, row[column] - mean))
                });
                Self::from_pairs(each, 1.0 / others.len() as f64)
            }
            Values::Alone(all) => {
                let mean = |c: &usize| stats::summarize(&offsets(&all[*c])).mean;
                let centre = others.iter().map(mean).sum::<f64>() / others.len() as f64;
                let each = all[column].iter().map(|e| {
                    let moment = Moment {
                        place: e.place,
                        taken: e.taken,
                    };
                    (moment, e.offset - centre)
                });
                Self::from_pairs(each, 0.0)
            }
        };
        if series.values.len() < FEWEST {
            return None;
        }
        series.reference_variance = reference_variance(data, &others);
        if let Values::Alone(all) = &data.values {
            let values: f64 = others.iter().map(|c| 1.0 / all[*c].len() as f64).sum();
            let size = others.len() as f64;
            series.reference_error = series.reference_variance * values / (size * size);
        }
        let share = |c: &usize| data.usual[*c].share;
        let size = others.len() as f64;
        let shares = share(&column) + others.iter().map(share).sum::<f64>() / (size * size);
        series.usual_error = shares * series.sigma().powi(2);
        Some(series)
    }

    fn from_pairs(pairs: impl Iterator<Item = (Moment, f64)>, reference_share: f64) -> Self {
        let (moments, values) = pairs.unzip();
        Self {
            moments,
            values,
            reference_variance: 0.0,
            reference_share,
            reference_error: 0.0,
            usual_error: 0.0,
        }
    }

    /// Standard deviation of the contrast, steps taken out: about the means of stretches, where there are
    /// enough, because an incident that came and went has two steps; else the best single step.
    fn sigma(&self) -> f64 {
        if self.values.len() >= FEWEST_STRETCHES * STRETCH {
            let stretches = self.values.rchunks_exact(STRETCH).map(stats::summarize);
            let (ss, count) = stretches.fold((0.0, 0), |(ss, n), s| (ss + s.ss, n + 1));
            return (ss / ((STRETCH - 1) * count) as f64).sqrt();
        }
        let flat = without_step(&self.values);
        let df = flat.len().saturating_sub(2).max(1);
        (flat.iter().map(|v| v * v).sum::<f64>() / df as f64).sqrt()
    }

    /// Contrast and its standard error over the values from `start` on: the mean deviation, or the
    /// logarithm of the ratio of sds.
    fn contrast(&self, start: usize, aspect: Aspect, yard: &Yardstick) -> Option<(f64, f64)> {
        let values = self.values.get(start..).filter(|v| v.len() >= FEWEST)?;
        let s = stats::summarize(values);
        match aspect {
            Aspect::Level => {
                let own = s.variance()? / s.n as f64;
                let se = ((own + self.reference_error + self.usual_error) * yard.factor).sqrt();
                (se > 0.0).then_some((s.mean, se))
            }
            Aspect::Spread => {
                let own = s.variance()? - self.reference_variance * self.reference_share;
                let ratio = (own / self.reference_variance).max(STILL * STILL).sqrt();
                let se = (0.5 * yard.factor / (s.n - 1) as f64).sqrt();
                (ratio.is_finite() && ratio > 0.0).then(|| (ratio.ln(), se))
            }
        }
    }

    fn size(&self, start: usize, aspect: Aspect, yard: &Yardstick) -> Option<Estimate> {
        let (value, se) = self.contrast(start, aspect, yard)?;
        let df = ((self.values.len() - start) as f64 / yard.factor - 1.0).max(1.0);
        let t = dist::t::isf(0.05 / (2 * yard.family.max(1)) as f64, df).ok()?;
        let (low, high) = (value - t * se, value + t * se);
        Some(match aspect {
            Aspect::Level => Estimate { value, low, high },
            Aspect::Spread => Estimate {
                value: value.exp(),
                low: low.exp(),
                high: high.exp(),
            },
        })
    }
}

fn offsets(entries: &[crate::window::Entry]) -> Vec<f64> {
    entries.iter().map(|e| e.offset).collect()
}

fn mean_of_present(columns: &[usize], row: &[f64]) -> Option<f64> {
    let present = columns.iter().map(|c| row[*c]).filter(|v| !v.is_nan());
    let (n, sum) = present.fold((0.0, 0.0), |(n, s), v| (n + 1.0, s + v));
    (n > 0.0).then(|| sum / n)
}

/// Variance of a reference source about the others of the reference, steps taken out; for a single
/// one, about its own mean.
fn reference_variance(data: &Data, columns: &[usize]) -> f64 {
    let count = columns.len() as f64;
    let contrasts = match &data.values {
        Values::Paired(rows) if columns.len() > 1 => about_the_rest(rows, columns),
        Values::Paired(rows) => vec![rows.column(columns[0], 0)],
        Values::Alone(all) => columns.iter().map(|&c| offsets(&all[c])).collect(),
    };
    let share = match &data.values {
        Values::Paired(_) if columns.len() > 1 => 1.0 + 1.0 / (count - 1.0),
        Values::Paired(_) | Values::Alone(_) => 1.0,
    };
    let variance = |values: &Vec<f64>| {
        let flat = without_step(values);
        let df = flat.len().saturating_sub(2).max(1);
        flat.iter().map(|v| v * v).sum::<f64>() / df as f64 / share
    };
    contrasts.iter().map(variance).sum::<f64>() / count
}

/// Each column's present values less the mean of the other columns in the same row.
fn about_the_rest(rows: &Rows, columns: &[usize]) -> Vec<Vec<f64>> {
    let mut about = vec![Vec::with_capacity(rows.len()); columns.len()];
    for r in 0..rows.len() {
        let row = rows.row(r);
        let present = columns.iter().map(|c| row[*c]).filter(|v| !v.is_nan());
        let (n, sum) = present.fold((0.0, 0.0), |(n, s), v| (n + 1.0, s + v));
        for (values, &c) in about.iter_mut().zip(columns) {
            if !row[c].is_nan() && n > 1.0 {
                values.push(row[c] - (sum - row[c]) / (n - 1.0));
            }
        }
    }
    about
}

/// ((sum of what lies beyond half the margin)+)^2 / n / sigma^2 for every start, in the direction in
/// which that is largest. Half the margin, because the even set has its centre at most that far from
/// where a source may lastingly be.
fn level_statistics(series: &Series, yard: &Yardstick) -> Vec<f64> {
    let variance = series.sigma().powi(2) * yard.factor;
    let one_sided = |sign: f64| -> Vec<f64> {
        let beyond = |v: &f64| sign * v - yard.margin / 2.0;
        backwards(&series.values, beyond, |n, sum| {
            sum.max(0.0).powi(2) / n / variance
        })
    };
    let (up, down) = (one_sided(1.0), one_sided(-1.0));
    let top = |s: &[f64]| s.iter().copied().fold(0.0, f64::max);
    if top(&up) >= top(&down) { up } else { down }
}

/// Twice the log likelihood ratio of a changed variance against the reference's, for every start.
fn spread_statistics(series: &Series, yard: &Yardstick) -> Vec<f64> {
    let base = series.reference_variance * (1.0 + series.reference_share);
    if base.is_nan() || base <= 0.0 {
        return Vec::new();
    }
    let flat = without_step(&series.values);
    let ratio = |n: f64, sum: f64| sum / n;
    let cost = |r: f64| r - 1.0 - r.max(STILL * STILL).ln();
    let one_sided = |more: bool| {
        backwards(
            &flat,
            |v| v * v / base,
            |n, sum| {
                let r = ratio(n, sum);
                if (r > 1.0) == more {
                    n * cost(r) / yard.factor
                } else {
                    0.0
                }
            },
        )
    };
    let (erratic, quiet) = (one_sided(true), one_sided(false));
    let top = |s: &[f64]| s.iter().copied().fold(0.0, f64::max);
    if top(&erratic) >= top(&quiet) {
        erratic
    } else {
        quiet
    }
}

/// For every start, a function of the number of values from it on and their sum; the last
/// `FEWEST - 1` starts hold too few values and get zero.
fn backwards(values: &[f64], term: impl Fn(&f64) -> f64, of: impl Fn(f64, f64) -> f64) -> Vec<f64> {
    let mut statistics = vec![0.0; values.len()];
    let mut sum = 0.0;
    for (i, v) in values.iter().enumerate().rev() {
        sum += term(v);
        let n = values.len() - i;
        if n >= FEWEST {
            statistics[i] = of(n as f64, sum);
        }
    }
    statistics
}
