//! Level: are the sources' means alike?
//!
//! Paired banks: two-way analysis without interaction with the cycles as blocks, and Tukey's
//! intervals from its residual mean square. Others: Welch (1951) where every difference matters, else
//! the pairs beyond the margin against the Games–Howell quantile. Dependence is paid for with larger
//! variances and fewer degrees of freedom.

use crate::stats::{self, Blocked, Degenerate, Df, Summary, Test, dist};

use super::data::{Data, Values};
use super::dependence;
use super::errors::Errors;
use super::judged::Judged;
use super::look::{Dependence, Estimate, Method, TestEntry};

/// Intervals shown to people hold together for all sources with this probability.
const SHOWN_ALPHA: f64 = 0.05;

/// What the values say about level.
pub struct Level {
    /// Every test that could be computed.
    pub tests: Vec<TestEntry>,
    /// The even set at the naming's error rate.
    pub even: Vec<bool>,
    /// Each source's deviation from the even set without it.
    pub deviations: Vec<Option<Estimate>>,
    /// Smallest probability of a pair beyond the margin.
    pub pair_p: f64,
    /// Standard deviation within sources.
    pub sigma: f64,
    /// How much successive values resemble each other.
    pub dependence: Option<Dependence>,
    /// What spread is judged on: residuals within the cycle, or the raw values.
    pub within: Vec<Vec<f64>>,
    /// The sources' means, in the unit, about a centre of their own.
    pub means: Vec<f64>,
    /// How surely those differ.
    pub errors: Errors,
}

impl Level {
    /// Judges a cut of the data. `margins` holds each column's margin; a pair's is the larger one.
    /// With a `reference` (a column) the others are compared with it alone. `known` is the bank's
    /// dependence as estimated from more values than these.
    ///
    /// # Errors
    /// [`Degenerate`] when nothing can be said.
    pub fn judge(
        data: &Data,
        margins: &[f64],
        reference: Option<usize>,
        known: Option<Dependence>,
    ) -> Result<Self, Degenerate> {
        let terms = Terms {
            margins,
            reference,
            known,
        };
        match &data.values {
            Values::Paired(rows) => {
                let blocked = stats::blocked_anova(&rows.blocks(0))?;
                Ok(paired(data, blocked, &terms))
            }
            Values::Alone(_) => alone(data, &terms),
        }
    }

    /// The larger of the probabilities that must all be small for a call.
    pub fn deciding_p(&self) -> f64 {
        let deciding = self.tests.iter().filter(|t| t.decides);
        deciding.map(|t| t.p_paid).fold(self.pair_p, f64::max)
    }

    /// Whether level is called at a look's share `alpha` of the budget.
    pub fn calls(&self, alpha: f64) -> bool {
        let mut deciding = self.tests.iter().filter(|t| t.decides).peekable();
        deciding.peek().is_some() && deciding.all(|t| t.p_paid < alpha) && self.pair_p < alpha
    }
}

/// On what terms sources are compared.
struct Terms<'a> {
    margins: &'a [f64],
    reference: Option<usize>,
    known: Option<Dependence>,
}

impl Terms<'_> {
    fn judge(&self, n: &[usize], means: &[f64], errors: &Errors) -> Judged {
        match self.reference {
            Some(reference) => Judged::against(reference, n, means, errors, self.margins),
            None => Judged::every_pair(means, errors, self.margins),
        }
    }

    /// What everybody's deviation is from.
    fn set(&self, even: &[bool]) -> Vec<bool> {
        match self.reference {
            Some(reference) => (0..even.len()).map(|i| i == reference).collect(),
            None => even.to_vec(),
        }
    }
}

fn paired(data: &Data, blocked: Blocked, terms: &Terms) -> Level {
    let k = data.sources.len();
    let within: Vec<Vec<f64>> = (0..k).map(|c| blocked.residuals.source_values(c)).collect();
    let dependence = terms.known.or_else(|| dependence::estimate(&within));
    let factor = dependence.map_or(1.0, |d| d.variance_factor);
    let variance = blocked.ms_residual * factor;
    let df = (blocked.residual_df / factor).max(1.0);
    let share = |i: usize| data.usual[i].share;
    let errors = Errors::new(k, |i, j| {
        let own = blocked.difference_variance(i, j);
        (variance * (own + share(i) + share(j)), df)
    });
    // Learnt places have chance of their own, of which the textbook's F knows nothing.
    let learnt = variance / errors.mean_variance() * mean_variance(&blocked);
    let paid = dist::f::sf(blocked.test.statistic / factor * learnt, (k - 1) as f64, df);
    let mut tests = vec![entry(
        Method::BlockedAnova,
        blocked.test,
        paid.ok(),
        Role::Decides,
    )];
    let columns = data.columns();
    tests.extend(classical(&columns, Form::Raw));
    let centre = grand_mean(&columns);
    let means: Vec<f64> = blocked.effects.iter().map(|e| e + centre).collect();
    let n: Vec<usize> = columns.iter().map(Vec::len).collect();
    let judged = terms.judge(&n, &means, &errors);
    Level {
        tests,
        deviations: deviations(&means, &terms.set(&judged.even), |one, set| {
            (errors.of_contrast(&against(k, one, set)).max(0.0), df)
        }),
        sigma: blocked.ms_residual.sqrt(),
        even: judged.even,
        pair_p: judged.pair_p,
        dependence,
        within,
        means,
        errors,
    }
}

/// The mean variance of an effect in squared sigmas, as the differences show it.
fn mean_variance(blocked: &Blocked) -> f64 {
    Errors::new(blocked.effects.len(), |i, j| {
        (blocked.difference_variance(i, j), 1.0)
    })
    .mean_variance()
}

/// Weights of (one - mean of set) over `k` sources.
pub fn against(k: usize, one: usize, set: &[usize]) -> Vec<f64> {
    let mut weights = vec![0.0; k];
    for &j in set {
        weights[j] -= 1.0 / set.len() as f64;
    }
    weights[one] += 1.0;
    weights
}

fn alone(data: &Data, terms: &Terms) -> Result<Level, Degenerate> {
    let columns = data.columns();
    let dependence = terms.known.or_else(|| dependence::estimate(&columns));
    let factor = dependence.map_or(1.0, |d| d.variance_factor);
    let summaries: Vec<Summary> = columns.iter().map(|c| stats::summarize(c)).collect();
    let each = summaries.iter().zip(&data.usual);
    let thinned: Vec<Summary> = each.map(|(s, u)| thin(s, factor, u.share)).collect();
    let pairs = stats::games_howell_from(&thinned)?;
    let k = summaries.len();
    let mut cells = vec![(0.0, 1.0); k * k];
    for p in &pairs {
        let cell = (p.std_error * p.std_error, p.df);
        cells[p.a * k + p.b] = cell;
        cells[p.b * k + p.a] = cell;
    }
    let errors = Errors::new(k, |i, j| cells[i * k + j]);
    let means: Vec<f64> = summaries.iter().map(|s| s.mean).collect();
    let n: Vec<usize> = thinned.iter().map(|s| s.n).collect();
    let judged = terms.judge(&n, &means, &errors);
    let any_margin = terms.margins.iter().any(|m| *m > 0.0);
    let mut tests = classical(&columns, Form::AsDecided);
    if any_margin {
        tests.push(beyond_margin(&judged));
    } else if let Some(welch) = tests.iter_mut().find(|t| t.method == Method::Welch) {
        welch.decides = true;
        welch.p_paid = stats::welch_from(&thinned)?.p;
    }
    // Welch alone decides where every difference matters.
    let pair_p = if any_margin { judged.pair_p } else { 0.0 };
    let variance = |i: usize| thinned[i].variance().unwrap_or(0.0) / thinned[i].n as f64;
    Ok(Level {
        tests,
        deviations: deviations(&means, &terms.set(&judged.even), |one, set| {
            welch_contrast(&thinned, &variance, one, set)
        }),
        sigma: pooled_sd(&summaries),
        even: judged.even,
        pair_p,
        dependence,
        within: columns,
        means,
        errors,
    })
}

/// Whether a test is computed on raw values beside a deciding form on residuals.
#[derive(Clone, Copy, PartialEq)]
enum Form {
    Raw,
    AsDecided,
}

/// Whether a test takes part in the decision.
#[derive(Clone, Copy, PartialEq)]
pub enum Role {
    /// It does.
    Decides,
    /// It is reported beside.
    Beside,
}

/// A test as an entry of the look; without a paid probability the textbook's stands.
pub fn entry(method: Method, test: Test, paid: Option<f64>, role: Role) -> TestEntry {
    TestEntry {
        method,
        raw: false,
        statistic: test.statistic,
        df: match test.df {
            Df::None => Vec::new(),
            Df::One(df) => vec![df],
            Df::Two(a, b) => vec![a, b],
        },
        p: test.p,
        p_paid: paid.map_or(test.p, |p| p.max(test.p)),
        decides: role == Role::Decides,
    }
}

fn classical(columns: &[Vec<f64>], form: Form) -> Vec<TestEntry> {
    let groups: Vec<&[f64]> = columns.iter().map(Vec::as_slice).collect();
    let found = [
        (Method::Anova, stats::anova(&groups).map(|a| a.test)),
        (Method::Welch, stats::welch(&groups)),
    ];
    let entries = found.into_iter().filter_map(|(method, test)| {
        let entry = entry(method, test.ok()?, None, Role::Beside);
        Some(TestEntry {
            raw: form == Form::Raw,
            ..entry
        })
    });
    entries.collect()
}

fn beyond_margin(judged: &Judged) -> TestEntry {
    TestEntry {
        method: Method::PairsBeyondMargin,
        raw: false,
        statistic: judged.largest,
        df: Vec::new(),
        p: judged.pair_p,
        p_paid: judged.pair_p,
        decides: true,
    }
}

/// A summary with as many values as independent ones, about a place that is known, would tell as much
/// (at least two).
fn thin(s: &Summary, factor: f64, share: f64) -> Summary {
    let about_known = 1.0 / (1.0 / s.n as f64 + share);
    let n = ((about_known / factor) as usize).clamp(2, s.n.max(2));
    let variance = s.variance().unwrap_or(0.0);
    Summary {
        n,
        mean: s.mean,
        ss: variance * (n - 1) as f64,
    }
}

fn grand_mean(columns: &[Vec<f64>]) -> f64 {
    let means: Vec<f64> = columns.iter().map(|c| stats::summarize(c).mean).collect();
    means.iter().sum::<f64>() / means.len() as f64
}

fn pooled_sd(summaries: &[Summary]) -> f64 {
    let df: usize = summaries.iter().map(|s| s.n.saturating_sub(1)).sum();
    (summaries.iter().map(|s| s.ss).sum::<f64>() / df.max(1) as f64).sqrt()
}

/// Variance of (one - mean of set) of independent means, and its Welch–Satterthwaite df.
fn welch_contrast(
    summaries: &[Summary],
    variance: &impl Fn(usize) -> f64,
    one: usize,
    set: &[usize],
) -> (f64, f64) {
    let share = 1.0 / (set.len() as f64 * set.len() as f64);
    let parts = std::iter::once((one, variance(one)));
    let parts: Vec<(usize, f64)> = parts
        .chain(set.iter().map(|&j| (j, variance(j) * share)))
        .collect();
    let total: f64 = parts.iter().map(|(_, v)| v).sum();
    let spent: f64 = parts
        .iter()
        .map(|(i, v)| v * v / (summaries[*i].n - 1) as f64)
        .sum();
    (
        total,
        if spent > 0.0 {
            total * total / spent
        } else {
            1.0
        },
    )
}

/// Everybody's deviation from the even set without themselves, with Bonferroni's simultaneous
/// intervals over the sources.
fn deviations(
    means: &[f64],
    even: &[bool],
    error: impl Fn(usize, &[usize]) -> (f64, f64),
) -> Vec<Option<Estimate>> {
    let k = means.len();
    // In a paired bank all share their degrees of freedom, and the quantile costs more than the rest.
    let mut quantile = (f64::NAN, None);
    let mut t = |df: f64| {
        if df != quantile.0 {
            quantile = (df, dist::t::isf(SHOWN_ALPHA / (2 * k) as f64, df).ok());
        }
        quantile.1
    };
    let deviation = |one: usize| {
        let set = others(even, one);
        let (variance, df) = error(one, &set);
        let reference = set.iter().map(|&j| means[j]).sum::<f64>() / set.len() as f64;
        let value = means[one] - reference;
        let half = t(df.max(1.0))? * variance.sqrt();
        let finite = value.is_finite() && half.is_finite();
        finite.then_some(Estimate {
            value,
            low: value - half,
            high: value + half,
        })
    };
    (0..k).map(deviation).collect()
}

/// The even set without one source; everybody else when that leaves nobody.
pub fn others(even: &[bool], one: usize) -> Vec<usize> {
    let set: Vec<usize> = (0..even.len()).filter(|&j| j != one && even[j]).collect();
    if set.is_empty() {
        (0..even.len()).filter(|&j| j != one).collect()
    } else {
        set
    }
}
