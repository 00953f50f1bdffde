//! A look taken apart: for each span and each test the sums it goes through, so that an engineer can
//! repeat it by hand from the windows' values.
//!
//! Works on what the examination itself worked on; a test here and there is the same function of the same
//! values. Deliberately absent: the watch, which tells its own arithmetic (`watch::thresholds::account`).

use serde::{Deserialize, Serialize};

use crate::model::{Bank, Name, SourceIx};
use crate::stats::{self, Summary, dist};

use super::data::{Data, Need, Values};
use super::even::NAMING_ALPHA;
use super::examine::{Call, Examination, Participant};
use super::level::Level;
use super::look::{Look, Method, TestEntry};
use super::naming::Party;
use super::spread::SEARCH_COST;
use super::steps::without_step;

/// A named figure on the way.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Step {
    /// What it is, for people.
    pub what: String,
    /// The figure.
    pub value: f64,
}

/// A test with its sums, in the order in which one works them out.
#[derive(Clone, Debug, PartialEq)]
pub struct WorkedTest {
    /// As the look has it.
    pub entry: TestEntry,
    /// The sums, the statistic and what was paid.
    pub steps: Vec<Step>,
}

/// Two sources and what their difference says.
#[derive(Clone, Debug, PartialEq)]
pub struct WorkedPair {
    /// The one with the larger mean.
    pub above: Name,
    /// The other.
    pub below: Name,
    /// Difference of their means, in the unit.
    pub difference: f64,
    /// Its standard error, dependence paid.
    pub std_error: f64,
    /// Degrees of freedom, dependence paid.
    pub df: f64,
    /// What does not matter between the two, in the unit.
    pub margin: f64,
    /// sqrt(2) (difference - margin) / standard error.
    pub q: f64,
    /// Probability of any pair as far beyond its margin.
    pub p: f64,
    /// Lower end of the simultaneous interval at the look's own level, in the unit.
    pub low: f64,
}

/// One span of a look.
#[derive(Clone, Debug, PartialEq)]
pub struct Worked {
    /// Values per source.
    pub span: usize,
    /// The tests, deciding ones first.
    pub tests: Vec<WorkedTest>,
    /// The pairs beyond the margin, the clearest first.
    pub pairs: Vec<WorkedPair>,
    /// The sources by their means, lowest first, with those means (about the bank's origin).
    pub order: Vec<(Name, f64)>,
    /// Who belongs to the even set, at the naming's error rate.
    pub even: Vec<Name>,
    /// That error rate.
    pub naming_alpha: f64,
}

/// Takes every look of an examination apart.
pub fn work_through(bank: &Bank, who: &[Participant], exam: &Examination) -> Vec<Worked> {
    let taking_apart = Apart { bank, who, exam };
    let worked = |look| taking_apart.span(look);
    exam.looks.iter().filter_map(worked).collect()
}

/// Takes the naming of the watch's call apart: the values since its start. `None` when a look called, whose
/// names come from its own span.
pub fn work_through_since(
    bank: &Bank,
    who: &[Participant],
    exam: &Examination,
) -> Option<(Call, Worked)> {
    let call = exam.crossed.clone()?;
    let cut = exam.data.since(call.began?.start.place)?;
    let look = exam.looks.last()?;
    let party = Party { bank, who };
    let level = party.level(&cut, look.dependence).ok()?;
    let since = Look {
        span: cut.columns().iter().map(Vec::len).max().unwrap_or(0),
        tests: level.tests.clone(),
        ..look.clone()
    };
    let apart = Apart { bank, who, exam };
    Some((call, apart.cut(&since, &cut, &level)))
}

struct Apart<'a> {
    bank: &'a Bank,
    who: &'a [Participant],
    exam: &'a Examination,
}

impl Apart<'_> {
    fn span(&self, look: &Look) -> Option<Worked> {
        let party = Party {
            bank: self.bank,
            who: self.who,
        };
        let cut = self.exam.data.cut(look.span, Need::WholeSpan)?;
        let level = party.level(&cut, look.dependence).ok()?;
        Some(self.cut(look, &cut, &level))
    }

    fn cut(&self, look: &Look, cut: &Data, level: &Level) -> Worked {
        let party = Party {
            bank: self.bank,
            who: self.who,
        };
        let names = self.names(cut);
        let margins = party.margins(cut);
        let mut tests: Vec<WorkedTest> = look
            .tests
            .iter()
            .map(|entry| WorkedTest {
                steps: self.steps(entry, look, cut, level, &margins),
                entry: entry.clone(),
            })
            .collect();
        tests.sort_by_key(|t| !t.entry.decides);
        let mut order: Vec<(Name, f64)> = names.iter().cloned().zip(level.means.clone()).collect();
        order.sort_by(|a, b| a.1.total_cmp(&b.1));
        let even = names.iter().zip(&level.even).filter(|(_, even)| **even);
        Worked {
            span: look.span,
            tests,
            pairs: pairs(&names, level, &margins, look.alpha_level),
            order,
            even: even.map(|(name, _)| name.clone()).collect(),
            naming_alpha: NAMING_ALPHA,
        }
    }

    fn names(&self, cut: &Data) -> Vec<Name> {
        let name = |s: &SourceIx| {
            let own = self.who.iter().find(|p| p.source == *s);
            own.map_or_else(|| "".into(), |p| p.name.clone())
        };
        cut.sources.iter().map(name).collect()
    }

    fn steps(
        &self,
        entry: &TestEntry,
        look: &Look,
        cut: &Data,
        level: &Level,
        margins: &[f64],
    ) -> Vec<Step> {
        let factor = look.dependence.map_or(1.0, |d| d.variance_factor);
        let raw = cut.columns();
        let columns = if entry.raw { &raw } else { &level.within };
        let mut steps = match entry.method {
            Method::BlockedAnova => blocked(cut, factor),
            Method::Anova => anova(&raw),
            Method::Welch => welch(&raw),
            Method::BrownForsythe => deviations(columns),
            Method::BrownForsytheStepFree => {
                let flat: Vec<Vec<f64>> = columns.iter().map(|c| without_step(c)).collect();
                let mut steps = deviations(&flat);
                steps.extend(search_paid(&flat, factor));
                steps
            }
            Method::Bartlett => {
                let of_values = entry.raw || !self.bank.pairing.is_paired();
                bartlett(columns, if of_values { "values" } else { "residuals" })
            }
            Method::PairsBeyondMargin => {
                vec![step("largest margin of a pair", largest(margins))]
            }
        };
        steps.push(step("statistic", entry.statistic));
        let df = entry.df.iter().zip(1..);
        steps.extend(df.map(|(df, at)| step(&format!("degrees of freedom {at}"), *df)));
        steps.push(step("p of the textbook", entry.p));
        if entry.decides {
            steps.push(step("factor paid for dependence", factor));
            steps.push(step("p that decides", entry.p_paid));
        }
        steps
    }
}

fn step(what: &str, value: f64) -> Step {
    Step {
        what: what.to_owned(),
        value,
    }
}

fn largest(of: &[f64]) -> f64 {
    of.iter().copied().fold(0.0, f64::max)
}

fn groups(columns: &[Vec<f64>]) -> Vec<&[f64]> {
    columns.iter().map(Vec::as_slice).collect()
}

/// Cycle means are taken off; what is left is split into sources and residual.
fn blocked(cut: &Data, factor: f64) -> Vec<Step> {
    let Values::Paired(rows) = &cut.values else {
        return Vec::new();
    };
    let Ok(blocked) = stats::blocked_anova(&rows.blocks(0)) else {
        return Vec::new();
    };
    let k = blocked.effects.len() as f64;
    let paid_df = (blocked.residual_df / factor).max(1.0);
    vec![
        step("cycles, whose means are taken off", rows.len() as f64),
        step("sum of squares of the sources", blocked.ss_sources),
        step("sum of squares of the residuals", blocked.ss_residual),
        step("mean square of the sources", blocked.ss_sources / (k - 1.0)),
        step("mean square of the residuals", blocked.ms_residual),
        step(
            "F after dependence is paid",
            blocked.test.statistic / factor,
        ),
        step("degrees of freedom 2 after that", paid_df),
    ]
}

fn anova(columns: &[Vec<f64>]) -> Vec<Step> {
    let Ok(anova) = stats::anova(&groups(columns)) else {
        return Vec::new();
    };
    vec![
        step("sum of squares between sources", anova.ss_between),
        step("sum of squares within sources", anova.ss_within),
        step("mean square within sources", anova.ms_within),
    ]
}

/// Welch (1951): weights n/s², their sum, the weighted mean.
fn welch(columns: &[Vec<f64>]) -> Vec<Step> {
    let summaries: Vec<Summary> = columns.iter().map(|c| stats::summarize(c)).collect();
    let weight = |s: &Summary| s.variance().map_or(0.0, |v| s.n as f64 / v);
    let whole: f64 = summaries.iter().map(weight).sum();
    let mean = summaries.iter().map(|s| weight(s) * s.mean).sum::<f64>() / whole;
    vec![
        step("sum of the weights n/s²", whole),
        step("weighted mean, about the origin", mean),
    ]
}

/// Absolute deviations from each source's median, and the one-way analysis of those.
fn deviations(columns: &[Vec<f64>]) -> Vec<Step> {
    let Ok(sizes) = stats::brown_forsythe_summaries(&groups(columns)) else {
        return Vec::new();
    };
    let Ok(anova) = stats::anova_from(&sizes) else {
        return Vec::new();
    };
    let mut steps: Vec<Step> = sizes
        .iter()
        .zip(1..)
        .map(|(s, at)| {
            step(
                &format!("mean distance from the median, source {at}"),
                s.mean,
            )
        })
        .collect();
    steps.extend([
        step("sum of squares between these", anova.ss_between),
        step("sum of squares within these", anova.ss_within),
    ]);
    steps
}

/// What the search for a step costs: values and with them degrees of freedom.
fn search_paid(flat: &[Vec<f64>], factor: f64) -> Vec<Step> {
    let k = flat.len() as f64;
    let values = flat.iter().map(Vec::len).sum::<usize>() as f64;
    let left = (values - SEARCH_COST * k).max(1.0);
    vec![
        step("values, steps of level taken out", values),
        step("values after the search for steps is paid", left),
        step("F is multiplied by", left / values / factor),
        step(
            "degrees of freedom 2 after that",
            ((left - k) / factor).max(1.0),
        ),
    ]
}

/// Variances of what `of` says, and the pooled one.
fn bartlett(columns: &[Vec<f64>], of: &str) -> Vec<Step> {
    let summaries: Vec<Summary> = columns.iter().map(|c| stats::summarize(c)).collect();
    let df: usize = summaries.iter().map(|s| s.n.saturating_sub(1)).sum();
    let pooled = summaries.iter().map(|s| s.ss).sum::<f64>() / df.max(1) as f64;
    let mut steps: Vec<Step> = summaries
        .iter()
        .zip(1..)
        .filter_map(|(s, at)| {
            let what = format!("variance of the {of}, source {at}");
            Some(step(&what, s.variance()?))
        })
        .collect();
    steps.push(step("pooled variance", pooled));
    steps
}

/// The pairs beyond their margins, with the interval at the look's own level.
fn pairs(names: &[Name], level: &Level, margins: &[f64], alpha: f64) -> Vec<WorkedPair> {
    let k = names.len();
    let all = (0..k).flat_map(|i| (0..k).map(move |j| (i, j)));
    let pair = |(i, j): (usize, usize)| {
        let difference = level.means[i] - level.means[j];
        let margin = margins[i].max(margins[j]);
        if difference <= margin {
            return None;
        }
        let (std_error, df) = level.errors.of(i, j);
        let df = df.max(1.0);
        let q = std::f64::consts::SQRT_2 * (difference - margin) / std_error;
        let bar = dist::studentized_range::isf(alpha, k, df).ok()?;
        Some(WorkedPair {
            above: names[i].clone(),
            below: names[j].clone(),
            difference,
            std_error,
            df,
            margin,
            q,
            p: dist::studentized_range::sf(q, k, df).ok()?,
            low: difference - bar * std_error / std::f64::consts::SQRT_2,
        })
    };
    let mut found: Vec<WorkedPair> = all.filter_map(pair).collect();
    found.sort_by(|a, b| b.q.total_cmp(&a.q));
    found
}
