//! Looks and their short forms.

use std::collections::BTreeMap;

use serde::Serialize;
use utoipa::ToSchema;

use crate::model::{Name, Time};
use crate::verdict::{Dependence, Digest, Look, SourceLook, TestEntry};

use super::{EstimateBody, finite, word};

/// One test's result.
#[derive(Debug, Serialize, ToSchema)]
pub struct TestBody {
    /// The test's statistic.
    pub statistic: Option<f64>,
    /// Degrees of freedom, numerator first; `null` stands for infinity.
    pub df: Vec<Option<f64>>,
    /// Upper-tail probability as a textbook gives it, for independent values.
    pub p: Option<f64>,
    /// The same after dependence between successive values (and, for spread, the search for steps) has
    /// been paid for: what the decision uses.
    pub p_paid: Option<f64>,
    /// Whether the test takes part in the decision.
    pub decides: bool,
}

/// Dependence between successive values of a source.
#[derive(Debug, Serialize, ToSchema)]
pub struct DependenceBody {
    /// Pooled lag-one correlation.
    pub phi: Option<f64>,
    /// Its standard error.
    pub std_error: Option<f64>,
    /// Factor by which variances were enlarged.
    pub variance_factor: Option<f64>,
}

/// One source in a look.
#[derive(Debug, Serialize, ToSchema)]
pub struct SourceLookBody {
    /// Its name.
    pub source: String,
    /// Values used.
    pub n: usize,
    /// Their mean, in the unit.
    pub mean: Option<f64>,
    /// Standard deviation of what spread is judged on, in the unit.
    pub sd: Option<f64>,
    /// Deviation from the even set without this source, in the unit.
    pub deviation: Option<EstimateBody>,
    /// Ratio of its standard deviation to that of the even set without it.
    pub sd_ratio: Option<EstimateBody>,
    /// Named for its level.
    pub named_level: bool,
    /// Named for its spread.
    pub named_spread: bool,
}

/// A look at a bank over one span.
#[derive(Debug, Serialize, ToSchema)]
pub struct LookBody {
    /// The bank.
    pub bank: String,
    /// When.
    #[schema(value_type = String, format = DateTime)]
    pub at: Time,
    /// Values per source asked for.
    pub span: usize,
    /// `even`, `level_apart`, `spread_apart`, `not_enough_data` or `dependent_data`.
    pub finding: String,
    /// Why nothing could be concluded, or what to mind.
    pub remark: String,
    /// Share of the call budget spent on level at this look.
    pub alpha_level: f64,
    /// The same for spread.
    pub alpha_spread: f64,
    /// One entry per method; `_raw` where the deciding form works on residuals within the cycle.
    pub tests: BTreeMap<String, TestBody>,
    /// Where it could be estimated.
    pub dependence: Option<DependenceBody>,
    /// Standard deviation within sources, pooled, in the unit.
    pub sigma: Option<f64>,
    /// The sources in the bank's display order.
    pub sources: Vec<SourceLookBody>,
}

impl From<&Look> for LookBody {
    fn from(look: &Look) -> Self {
        let Look {
            bank,
            at,
            span,
            finding,
            remark,
            alpha_level,
            alpha_spread,
            tests,
            dependence,
            sigma,
            sources,
        } = look;
        Self {
            bank: bank.to_string(),
            at: *at,
            span: *span,
            finding: word(finding),
            remark: remark.clone(),
            alpha_level: *alpha_level,
            alpha_spread: *alpha_spread,
            tests: tests.iter().map(|t| (t.key(), test(t))).collect(),
            dependence: dependence.map(dependence_body),
            sigma: finite(*sigma),
            sources: sources.iter().map(source_look).collect(),
        }
    }
}

fn test(test: &TestEntry) -> TestBody {
    TestBody {
        statistic: finite(test.statistic),
        df: test.df.iter().copied().map(finite).collect(),
        p: finite(test.p),
        p_paid: finite(test.p_paid),
        decides: test.decides,
    }
}

fn dependence_body(dependence: Dependence) -> DependenceBody {
    let Dependence {
        phi,
        std_error,
        variance_factor,
    } = dependence;
    DependenceBody {
        phi: finite(phi),
        std_error: finite(std_error),
        variance_factor: finite(variance_factor),
    }
}

fn source_look(source: &SourceLook) -> SourceLookBody {
    let SourceLook {
        source: _,
        name,
        n,
        mean,
        sd,
        deviation,
        sd_ratio,
        named_level,
        named_spread,
    } = source;
    SourceLookBody {
        source: name.to_string(),
        n: *n,
        mean: finite(*mean),
        sd: finite(*sd),
        deviation: deviation.map(Into::into),
        sd_ratio: sd_ratio.map(Into::into),
        named_level: *named_level,
        named_spread: *named_spread,
    }
}

/// The short form of a look, kept for every look.
#[derive(Debug, Serialize, ToSchema)]
pub struct DigestBody {
    /// When.
    #[schema(value_type = String, format = DateTime)]
    pub at: Time,
    /// Values per source asked for.
    pub span: usize,
    /// The conclusion, as in a look.
    pub finding: String,
    /// Probability of the test that decides on level.
    pub level_p: Option<f64>,
    /// Probability of the test that decides on spread.
    pub spread_p: Option<f64>,
    /// The level's share of the budget at this look.
    pub alpha_level: f64,
    /// The spread's share of the budget at this look.
    pub alpha_spread: f64,
    /// Sources named for their level.
    pub named_level: Vec<String>,
    /// Sources named for their spread.
    pub named_spread: Vec<String>,
    /// Every source's deviation from the even set, in the unit.
    pub deviations: Vec<DeviationBody>,
}

/// One source's deviation in the short form of a look.
#[derive(Debug, Serialize, ToSchema)]
pub struct DeviationBody {
    /// The source.
    pub source: String,
    /// Its deviation, in the unit, where it could be judged.
    pub deviation: Option<f32>,
}

impl From<Digest> for DigestBody {
    fn from(digest: Digest) -> Self {
        let Digest {
            at,
            span,
            finding,
            level_p,
            spread_p,
            alpha_level,
            alpha_spread,
            named_level,
            named_spread,
            deviations,
        } = digest;
        let names = |list: Vec<Name>| list.iter().map(ToString::to_string).collect();
        let deviations = deviations
            .into_iter()
            .map(|(source, deviation)| DeviationBody {
                source: source.to_string(),
                deviation: deviation.filter(|d| d.is_finite()),
            });
        Self {
            at,
            span,
            finding: word(finding),
            level_p: level_p.and_then(finite),
            spread_p: spread_p.and_then(finite),
            alpha_level,
            alpha_spread,
            named_level: names(named_level),
            named_spread: names(named_spread),
            deviations: deviations.collect(),
        }
    }
}
