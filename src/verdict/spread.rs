//! Spread: are the sources' standard deviations alike?
//!
//! Brown–Forsythe is reported as the textbook has it; the deciding form works on values from which the
//! best single step of each source was taken out, because a step of level is never a change of spread.
//! Names come from Games–Howell on the absolute deviations from each source's median, and only a ratio
//! of standard deviations beyond `spread_margin` counts.

use crate::stats::{self, Summary, dist};

use super::even::{Means, NAMING_ALPHA};
use super::level::{Role, entry, others};
use super::look::{Estimate, Method, TestEntry};
use super::steps::without_step;
use super::track::STILL;

/// Intervals shown to people hold together for all sources with this probability.
const SHOWN_ALPHA: f64 = 0.05;

/// What the values say about spread.
pub struct Spread {
    /// Every test that could be computed.
    pub tests: Vec<TestEntry>,
    /// Standard deviation of each source, steps left in, freed from what the others put into it.
    pub sds: Vec<f64>,
    /// Ratio of each source's sd (steps taken out) to that of the even set without it.
    pub ratios: Vec<Option<Estimate>>,
    /// Sources outside the even set whose ratio is beyond the margin.
    pub named: Vec<bool>,
    /// Probability that decides.
    pub p: f64,
}

/// Whether residuals carry a share of every other source's noise.
#[derive(Clone, Copy, PartialEq, Eq)]
pub enum Within {
    /// Residuals within the cycle.
    Residuals,
    /// Raw values of each source.
    Raw,
}

impl Spread {
    /// Judges columns of residuals or values. `None` where there is too little, or (two paired
    /// sources) the residuals mirror each other and say nothing.
    pub fn judge(
        columns: &[Vec<f64>],
        within: Within,
        spread_margin: f64,
        factor: f64,
    ) -> Option<Self> {
        let k = columns.len();
        if k < 2 || (within == Within::Residuals && k < 3) || columns.iter().any(|c| c.len() < 2) {
            return None;
        }
        let flat: Vec<Vec<f64>> = columns.iter().map(|c| without_step(c)).collect();
        let mut tests = reported(columns);
        let deciding = step_free(&flat, factor);
        let p = deciding.as_ref().map_or(1.0, |t| t.p_paid);
        tests.extend(deciding);
        let sds = own_sds(columns, within);
        let flat_sds = own_sds(&flat, within);
        let even = even_in_spread(&flat);
        let ratios = ratios(&flat, &flat_sds, &even);
        let beyond = |r: &Option<Estimate>| {
            r.is_some_and(|r| r.value > spread_margin || r.value < 1.0 / spread_margin)
        };
        let apart = even.iter().zip(&ratios).map(|(e, r)| !e && beyond(r));
        let mut named: Vec<bool> = apart.collect();
        if k == 2 && named.contains(&true) {
            // Of two, nobody is the culprit.
            named = vec![true; 2];
        }
        Some(Self {
            tests,
            sds,
            ratios,
            named,
            p,
        })
    }

    /// Whether spread is called at a look's share `alpha` of the budget.
    pub fn calls(&self, alpha: f64) -> bool {
        self.p < alpha && self.named.contains(&true)
    }
}

/// Brown–Forsythe and Bartlett as the textbook has them.
pub fn reported(columns: &[Vec<f64>]) -> Vec<TestEntry> {
    let groups: Vec<&[f64]> = columns.iter().map(Vec::as_slice).collect();
    let found = [
        (Method::BrownForsythe, stats::brown_forsythe(&groups)),
        (Method::Bartlett, stats::bartlett(&groups)),
    ];
    let entries = found
        .into_iter()
        .filter_map(|(m, t)| Some(entry(m, t.ok()?, None, Role::Beside)));
    entries.collect()
}

/// Brown–Forsythe without steps. Dependence and the search for the steps are paid for by a smaller F
/// and fewer degrees of freedom within sources: each source has lost its split and a second mean.
fn step_free(flat: &[Vec<f64>], factor: f64) -> Option<TestEntry> {
    let groups: Vec<&[f64]> = flat.iter().map(Vec::as_slice).collect();
    let test = stats::brown_forsythe(&groups).ok()?;
    let k = flat.len() as f64;
    let values: usize = flat.iter().map(Vec::len).sum();
    let left = values as f64 - SEARCH_COST * k;
    let df = ((left - k) / factor).max(1.0);
    let shrink = (left.max(1.0) / values as f64) / factor;
    let paid = dist::f::sf(test.statistic * shrink, k - 1.0, df).ok()?;
    Some(entry(
        Method::BrownForsytheStepFree,
        test,
        Some(paid),
        Role::Decides,
    ))
}

/// Values per source that the search for a step costs; chosen by simulation (`tests/look_rates.rs`): with
/// it the realised rate of the deciding test stays below the nominal one from 10 values a source on.
pub const SEARCH_COST: f64 = 3.0;

fn even_in_spread(flat: &[Vec<f64>]) -> Vec<bool> {
    let groups: Vec<&[f64]> = flat.iter().map(Vec::as_slice).collect();
    let Ok(deviations) = stats::brown_forsythe_summaries(&groups) else {
        return vec![true; flat.len()];
    };
    let means: Vec<f64> = deviations.iter().map(|s| s.mean).collect();
    let error = |i: usize, j: usize| welch_error(&deviations[i], &deviations[j]);
    let margin = |_: usize, _: usize| 0.0;
    Means {
        means: &means,
        error: &error,
        margin: &margin,
    }
    .even_set(NAMING_ALPHA)
}

/// Welch's standard error of a difference and its degrees of freedom.
fn welch_error(a: &Summary, b: &Summary) -> (f64, f64) {
    let part = |s: &Summary| s.variance().unwrap_or(0.0) / s.n as f64;
    let (va, vb) = (part(a), part(b));
    let spent = va * va / (a.n - 1).max(1) as f64 + vb * vb / (b.n - 1).max(1) as f64;
    let total = va + vb;
    (
        total.sqrt(),
        if spent > 0.0 {
            total * total / spent
        } else {
            1.0
        },
    )
}

/// Each source's own standard deviation. A residual within the cycle carries a share of everybody's
/// noise; Grubbs (1948) takes it out: sigma_i^2 = k/(k-2) (V_i - sum V_j / (k (k-1))).
fn own_sds(columns: &[Vec<f64>], within: Within) -> Vec<f64> {
    let variance = |c: &Vec<f64>| stats::summarize(c).variance().unwrap_or(0.0);
    let variances: Vec<f64> = columns.iter().map(variance).collect();
    let k = columns.len() as f64;
    let shared = variances.iter().sum::<f64>() / (k * (k - 1.0));
    let own = |v: &f64| match within {
        Within::Raw => *v,
        Within::Residuals => (k / (k - 2.0) * (v - shared)).max(0.0),
    };
    variances.iter().map(|v| own(v).sqrt()).collect()
}

/// Ratios to the pooled sd of the even set without the source, with intervals from the variance of a
/// logarithm of a sample sd, (kurtosis - 1)/(4 n), kurtosis pooled and at least the normal's 3.
fn ratios(columns: &[Vec<f64>], sds: &[f64], even: &[bool]) -> Vec<Option<Estimate>> {
    let k = columns.len();
    let spread = (pooled_kurtosis(columns) - 1.0) / 4.0;
    let z = dist::normal::isf(SHOWN_ALPHA / (2 * k) as f64).unwrap_or(f64::INFINITY);
    let ratio = |i: usize| {
        let set = others(even, i);
        let pooled = set.iter().map(|&j| sds[j] * sds[j]).sum::<f64>() / set.len() as f64;
        let values: usize = set.iter().map(|&j| columns[j].len()).sum();
        let value = (sds[i] / pooled.sqrt()).max(STILL);
        if !value.is_finite() {
            return None;
        }
        let se = (spread * (1.0 / columns[i].len() as f64 + 1.0 / values as f64)).sqrt();
        let reach = (z * se).exp();
        Some(Estimate {
            value,
            low: value / reach,
            high: value * reach,
        })
    };
    (0..k).map(ratio).collect()
}

fn pooled_kurtosis(columns: &[Vec<f64>]) -> f64 {
    const NORMAL: f64 = 3.0;
    let each = columns.iter().filter_map(|c| {
        let s = stats::summarize(c);
        let m2 = s.ss / s.n as f64;
        let m4 = c.iter().map(|v| (v - s.mean).powi(4)).sum::<f64>() / s.n as f64;
        (m2 > 0.0).then(|| m4 / (m2 * m2))
    });
    let (n, sum) = each.fold((0.0, 0.0), |(n, sum), x| (n + 1.0, sum + x));
    if n > 0.0 {
        (sum / n).max(NORMAL)
    } else {
        NORMAL
    }
}
