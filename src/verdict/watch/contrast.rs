//! Contrasts of window means: the best split of the bank in two, and the two sources furthest apart.

use super::rows::{Rows, Whole};
use super::scale::Own;

/// A source takes part in a window with at least this share of its values; one with fewer says little, and
/// says it of another stretch of time.
const PRESENT: f64 = 0.5;

/// The means of one window.
#[derive(Clone, Debug, Default)]
pub struct Means {
    /// Mean and column of each source that takes part.
    pub sources: Vec<Mean>,
    /// Whether all means are equally sure.
    uniform: bool,
    sums: Vec<f64>,
    counts: Vec<u16>,
}

/// One source's mean over a window.
#[derive(Clone, Copy, Debug)]
pub struct Mean {
    /// Its mean residual, in the unit.
    pub value: f64,
    /// Its column.
    pub column: usize,
    /// One over the variance of the mean.
    pub weight: f64,
}

/// How means are judged.
#[derive(Clone, Copy, Debug)]
pub struct Judged<'a> {
    /// Variance of one value, dependence paid, unit squared.
    pub variance: f64,
    /// The same for each column where they differ; empty where not.
    pub own: &'a [Own],
    /// What dependence multiplies these with.
    pub factor: f64,
    /// The margin, in the unit.
    pub margin: f64,
    /// By how much a column's own margin is larger; empty where none is.
    pub allowed: &'a [f64],
}

impl Judged<'_> {
    fn variance_of(&self, column: usize) -> f64 {
        let own = self.own.get(column).map(|own| own.variance * self.factor);
        own.unwrap_or(self.variance)
    }
}

/// The two groups of a split: the first `top` of the means sorted downwards, and its squared statistic.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Split {
    /// Squared statistic.
    pub statistic: f64,
    /// How many sources are above.
    pub top: usize,
}

/// The two sources furthest apart, and how far, as a studentized range.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Pair {
    /// ((difference - margin)+) sqrt(n) / sigma.
    pub statistic: f64,
    /// Columns above and below.
    pub columns: (usize, usize),
}

impl Means {
    /// Fills in the means over the newest `n` cycles.
    pub fn fill(&mut self, rows: &Rows, n: usize, by: &Judged) {
        let whole = rows.window(n, &mut self.sums, &mut self.counts);
        let least = PRESENT * n as f64;
        self.uniform = whole == Whole::Yes && by.own.is_empty();
        self.sources.clear();
        for (column, sum) in self.sums.iter().enumerate() {
            let count = match whole {
                Whole::Yes => n as f64,
                Whole::No => f64::from(self.counts[column]),
            };
            if count < least {
                continue;
            }
            let allowed = by.allowed.get(column).copied().unwrap_or(0.0);
            let mean = sum / count;
            self.sources.push(Mean {
                value: mean.signum() * (mean.abs() - allowed).max(0.0),
                column,
                weight: count / by.variance_of(column),
            });
        }
    }

    /// Sum of squares between the means, in units of their variance: chi-square with one degree less than
    /// sources when all are even. No split contrast is larger.
    pub fn squares(&self) -> f64 {
        let (w, s) = self.sources.iter().fold((0.0, 0.0), |(w, s), m| {
            (w + m.weight, s + m.weight * m.value)
        });
        let mean = s / w;
        let about = |m: &Mean| m.weight * (m.value - mean).powi(2);
        self.sources.iter().map(about).sum()
    }

    /// Sorts the means downwards.
    pub fn sort(&mut self) {
        let down = |a: &Mean, b: &Mean| b.value.total_cmp(&a.value).then(a.column.cmp(&b.column));
        self.sources.sort_unstable_by(down);
    }

    /// The best split of the sorted means beyond the margin.
    pub fn split(&self, by: &Judged) -> Option<Split> {
        let total = self.sources.iter().fold((0.0, 0.0), |(w, s), m| {
            (w + m.weight, s + m.weight * m.value)
        });
        let (mut weight, mut sum) = (0.0, 0.0);
        let mut best: Option<Split> = None;
        for (i, m) in self.sources.iter().enumerate().rev().skip(1).rev() {
            weight += m.weight;
            sum += m.weight * m.value;
            let rest = total.0 - weight;
            let apart = (sum / weight - (total.1 - sum) / rest - by.margin).max(0.0);
            let statistic = apart * apart * weight * rest / total.0;
            if best.is_none_or(|b| statistic > b.statistic) {
                best = Some(Split {
                    statistic,
                    top: i + 1,
                });
            }
        }
        best
    }

    /// The squared statistic of the split part: with no margin at all the sum of squares, which sees every
    /// pattern, else the best split.
    pub fn split_statistic(&self, by: &Judged) -> f64 {
        if by.margin > 0.0 {
            self.split(by).map_or(0.0, |s| s.statistic)
        } else {
            self.squares()
        }
    }

    /// The pair of sorted means furthest beyond the margin.
    pub fn pair(&self, by: &Judged) -> Option<Pair> {
        let (first, last) = (self.sources.first()?, self.sources.last()?);
        let of = |a: &Mean, b: &Mean| {
            let variance = 0.5 * (1.0 / a.weight + 1.0 / b.weight);
            Pair {
                statistic: (a.value - b.value - by.margin).max(0.0) * variance.sqrt().recip(),
                columns: (a.column, b.column),
            }
        };
        if self.uniform {
            return Some(of(first, last));
        }
        let each = self.sources.iter().enumerate();
        let pairs = each.flat_map(|(i, a)| self.sources[i + 1..].iter().map(move |b| of(a, b)));
        pairs.max_by(|a, b| a.statistic.total_cmp(&b.statistic))
    }

    /// Bounds that need no sorting: what neither split nor pair can exceed.
    pub fn bounds(&self, by: &Judged) -> (f64, f64) {
        let values = self.sources.iter().map(|m| m.value);
        let (low, high) = values.fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| {
            (f64::min(l, v), f64::max(h, v))
        });
        let weights = self.sources.iter().map(|m| m.weight);
        let least = 1.0 / weights.fold(f64::MIN_POSITIVE, f64::max);
        let pair = (high - low - by.margin).max(0.0) * least.sqrt().recip();
        (self.squares(), pair)
    }
}
