//! What a look says: the classical examination of a bank at one moment over one span.

use serde::{Deserialize, Serialize};

use crate::model::{Name, SourceIx, Time};

/// What an examination concludes.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Finding {
    /// The sources are alike as far as the margin and the call budget ask.
    Even,
    /// Some source's level left the even set.
    LevelApart,
    /// Some source's spread left the even set.
    SpreadApart,
    /// Too few values or sources, or no spread at all: nothing can be said.
    NotEnoughData,
    /// Successive values depend on each other so much that the window holds too little information.
    DependentData,
}

impl Finding {
    /// The words people read.
    pub const fn words(self) -> &'static str {
        match self {
            Self::Even => "even",
            Self::LevelApart => "level apart",
            Self::SpreadApart => "spread apart",
            Self::NotEnoughData => "not enough data",
            Self::DependentData => "dependent data",
        }
    }
}

/// A test by its published name.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Method {
    /// Brown–Forsythe (Levene about the median).
    BrownForsythe,
    /// Brown–Forsythe after the best single step was taken out of each source's values; decides on spread.
    BrownForsytheStepFree,
    /// Bartlett.
    Bartlett,
    /// One-way analysis of variance with pooled variance.
    Anova,
    /// Welch 1951.
    Welch,
    /// Two-way analysis without interaction, cycles or slots as blocks.
    BlockedAnova,
    /// The largest difference of a pair beyond the margin, against the Games–Howell quantile.
    PairsBeyondMargin,
}

impl Method {
    /// The key in interfaces.
    pub const fn key(self) -> &'static str {
        match self {
            Self::BrownForsythe => "brown_forsythe",
            Self::BrownForsytheStepFree => "brown_forsythe_step_free",
            Self::Bartlett => "bartlett",
            Self::Anova => "anova",
            Self::Welch => "welch",
            Self::BlockedAnova => "blocked_anova",
            Self::PairsBeyondMargin => "pairs_beyond_margin",
        }
    }

    /// The words people read.
    pub const fn words(self) -> &'static str {
        match self {
            Self::BrownForsythe => "Brown–Forsythe",
            Self::BrownForsytheStepFree => "Brown–Forsythe, steps taken out",
            Self::Bartlett => "Bartlett",
            Self::Anova => "one-way ANOVA",
            Self::Welch => "Welch",
            Self::BlockedAnova => "blocked ANOVA",
            Self::PairsBeyondMargin => "pairs beyond the margin",
        }
    }
}

/// One test's result.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct TestEntry {
    /// Which test.
    pub method: Method,
    /// Computed on raw values although the deciding form works on residuals within the cycle.
    pub raw: bool,
    /// The test's statistic.
    pub statistic: f64,
    /// Its degrees of freedom, numerator first.
    pub df: Vec<f64>,
    /// Upper-tail probability as a textbook gives it, for independent values.
    pub p: f64,
    /// The same after dependence between successive values has been paid for (and, for spread, the
    /// search for steps); what the decision uses. Never below `p`.
    pub p_paid: f64,
    /// Whether this test takes part in the decision.
    pub decides: bool,
}

impl TestEntry {
    /// The key in interfaces: the method's, with `_raw` where it applies.
    pub fn key(&self) -> String {
        let raw = if self.raw { "_raw" } else { "" };
        format!("{}{raw}", self.method.key())
    }
}

/// A figure with its simultaneous interval, all in one unit.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Estimate {
    /// The figure.
    pub value: f64,
    /// Lower end.
    pub low: f64,
    /// Upper end.
    pub high: f64,
}

/// How much successive values of a source resemble each other.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Dependence {
    /// Pooled lag-one correlation.
    pub phi: f64,
    /// Its standard error.
    pub std_error: f64,
    /// The factor by which variances were enlarged to pay for it, 1 or more.
    pub variance_factor: f64,
}

/// One source in a look.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct SourceLook {
    /// Which source.
    pub source: SourceIx,
    /// Its name.
    pub name: Name,
    /// Values used.
    pub n: usize,
    /// Their mean, in the unit (origin included).
    pub mean: f64,
    /// Standard deviation of what the spread is judged on (residuals within the cycle when paired).
    pub sd: f64,
    /// Deviation from the mean of the even set without this source, with the simultaneous 95 % interval.
    pub deviation: Option<Estimate>,
    /// Ratio of its standard deviation to the pooled one of the even set without it, with interval.
    pub sd_ratio: Option<Estimate>,
    /// Named for its level.
    pub named_level: bool,
    /// Named for its spread.
    pub named_spread: bool,
}

/// A look at a bank over one span.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Look {
    /// The bank.
    pub bank: Name,
    /// When.
    pub at: Time,
    /// Values per source asked for.
    pub span: usize,
    /// The conclusion.
    pub finding: Finding,
    /// Why nothing could be concluded, or what to mind; empty when there is nothing to say.
    pub remark: String,
    /// The share of the call budget that this look spends on level.
    pub alpha_level: f64,
    /// The same for spread.
    pub alpha_spread: f64,
    /// Every test that could be computed.
    pub tests: Vec<TestEntry>,
    /// Dependence between successive values, where it could be estimated.
    pub dependence: Option<Dependence>,
    /// Standard deviation within sources (residual sd when paired), pooled, in the unit.
    pub sigma: f64,
    /// Every source that delivered, in the bank's display order.
    pub sources: Vec<SourceLook>,
}

impl Look {
    /// The test that decides on level, where it could be computed.
    pub fn level_test(&self) -> Option<&TestEntry> {
        self.deciding(|m| m != Method::BrownForsytheStepFree)
    }

    /// The test that decides on spread, where it could be computed.
    pub fn spread_test(&self) -> Option<&TestEntry> {
        self.deciding(|m| m == Method::BrownForsytheStepFree)
    }

    fn deciding(&self, wanted: impl Fn(Method) -> bool) -> Option<&TestEntry> {
        self.tests.iter().find(|t| t.decides && wanted(t.method))
    }

    /// The short form that is kept of every look.
    pub fn digest(&self) -> Digest {
        let named = |pick: fn(&SourceLook) -> bool| {
            let those = self.sources.iter().filter(|s| pick(s));
            those.map(|s| s.name.clone()).collect()
        };
        Digest {
            at: self.at,
            span: self.span,
            finding: self.finding,
            level_p: self.level_test().map(|t| t.p_paid),
            spread_p: self.spread_test().map(|t| t.p_paid),
            alpha_level: self.alpha_level,
            alpha_spread: self.alpha_spread,
            named_level: named(|s| s.named_level),
            named_spread: named(|s| s.named_spread),
            deviations: self
                .sources
                .iter()
                .map(|s| (s.name.clone(), s.deviation.map(|d| d.value as f32)))
                .collect(),
        }
    }
}

/// The short form of a look, kept for every look.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Digest {
    /// When.
    pub at: Time,
    /// Values per source asked for.
    pub span: usize,
    /// The conclusion.
    pub finding: Finding,
    /// Probability of the test that decides on level, dependence paid for.
    pub level_p: Option<f64>,
    /// Probability of the test that decides on spread, dependence paid for.
    pub spread_p: Option<f64>,
    /// The level's share of the budget at this look.
    pub alpha_level: f64,
    /// The spread's share of the budget at this look.
    pub alpha_spread: f64,
    /// Sources named for their level.
    pub named_level: Vec<Name>,
    /// Sources named for their spread.
    pub named_spread: Vec<Name>,
    /// Every source's deviation from the even set, in the unit.
    pub deviations: Vec<(Name, Option<f32>)>,
}
