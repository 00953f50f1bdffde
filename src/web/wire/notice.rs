//! Notices.

use serde::Serialize;
use utoipa::ToSchema;

use crate::model::Time;
use crate::notice::{Acknowledgement, Adjustment, NamedSource, Notice, Since};
use crate::verdict::{Pattern, Slip};

use super::{EntryBody, EstimateBody, finite, word};

/// A source that a notice names.
#[derive(Debug, Serialize, ToSchema)]
pub struct NamedSourceBody {
    /// Its name.
    pub source: String,
    /// Deviation (level) or ratio of standard deviations (spread), in the notice's `unit`.
    pub deviation: Option<f64>,
    /// Lower end of the simultaneous interval.
    pub low: Option<f64>,
    /// Upper end.
    pub high: Option<f64>,
}

/// Since when.
#[derive(Debug, Serialize, ToSchema)]
pub struct SinceBody {
    /// The most likely start.
    #[schema(value_type = String, format = DateTime)]
    pub at: Time,
    /// Earliest start that the data allow at 95 %.
    #[schema(value_type = String, format = DateTime)]
    pub earliest: Time,
    /// Latest start that the data allow at 95 %.
    #[schema(value_type = String, format = DateTime)]
    pub latest: Time,
}

/// Who acknowledged.
#[derive(Debug, Serialize, ToSchema)]
pub struct AcknowledgementBody {
    /// The person.
    pub by: String,
    /// When.
    #[schema(value_type = String, format = DateTime)]
    pub at: Time,
    /// What they wrote.
    pub comment: String,
}

/// One cause for many: what in the machine's geometry explains the notice.
#[derive(Debug, Serialize, ToSchema)]
pub struct PatternBody {
    /// `wave`, `slope`, `odd_from_even`, `half_from_half` or `group`.
    pub kind: String,
    /// What it is, for people, without its size.
    pub words: String,
    /// Its size in the bank's unit: a wave's amplitude, a slope's last place less its first, one part
    /// less the other.
    pub effect: Option<f64>,
    /// Lower end of the interval.
    pub low: Option<f64>,
    /// Upper end.
    pub high: Option<f64>,
    /// Probability of as large a one by chance.
    pub p: Option<f64>,
    /// The source at which a wave is highest.
    pub highest: Option<String>,
    /// The configured group.
    pub group: Option<String>,
}

/// All sources read as others.
#[derive(Debug, Serialize, ToSchema)]
pub struct SlipBody {
    /// Each source reads as the one that stands so many places before it.
    pub places: u16,
    /// Probability of a worse fit of the earlier picture, turned.
    pub fit: Option<f64>,
}

/// A notice.
#[derive(Debug, Serialize, ToSchema)]
pub struct NoticeBody {
    /// Unique in the plant.
    pub id: String,
    /// The plant.
    pub plant: String,
    /// The bank.
    pub bank: String,
    /// What it is about.
    pub kind: String,
    /// Where it stands.
    pub state: String,
    /// `low`, `medium` or `high`.
    pub priority: String,
    /// The sources named, largest deviation first.
    pub sources: Vec<NamedSourceBody>,
    /// The unit of the deviations.
    pub unit: String,
    /// Since when.
    pub since: SinceBody,
    /// When the call was made.
    #[schema(value_type = String, format = DateTime)]
    pub raised: Time,
    /// When anything in it last changed.
    #[schema(value_type = String, format = DateTime)]
    pub changed: Time,
    /// When the condition was last seen to be gone.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub returned: Option<Time>,
    /// Who acknowledged it.
    pub acknowledged: Option<AcknowledgementBody>,
    /// One line.
    pub subject: String,
    /// The whole text.
    pub text: String,
    /// What to check or adjust.
    pub advice: String,
    /// The bank's page.
    pub url: String,
    /// The span of the look that called; 0 for a condition.
    pub span: usize,
    /// Whether the condition holds, whoever has set the notice aside.
    pub holds: bool,
    /// Until when it is shelved.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub shelved_until: Option<Time>,
    /// What came of it, as a person said.
    pub outcome: Option<String>,
    /// Who did what, oldest first.
    pub log: Vec<EntryBody>,
    /// What in the machine's geometry explains it.
    pub pattern: Option<PatternBody>,
    /// By how many places all sources seem to have slipped.
    pub slip: Option<SlipBody>,
    /// How far the sources that stayed moved together since the start, in the bank's unit.
    pub common_movement: Option<f64>,
    /// Mean of the sources that the named ones are compared with, in the bank's unit.
    pub even_mean: Option<f64>,
    /// What the bank gives away in an hour, in the currency of `cost_per_unit`.
    pub cost_per_hour: Option<f64>,
    /// The last adjustment of a named source since it left, and what became of it.
    pub adjustment: Option<AdjustmentBody>,
}

/// An adjustment of a named source, and what the values since say of it.
#[derive(Debug, Serialize, ToSchema)]
pub struct AdjustmentBody {
    /// The source.
    pub source: String,
    /// When it was entered.
    #[schema(value_type = String, format = DateTime)]
    pub at: Time,
    /// By how much, in the bank's unit, where that was said.
    pub amount: Option<f64>,
    /// Values of the source since.
    pub values: usize,
    /// Its deviation over those.
    pub deviation: Option<EstimateBody>,
    /// `not_sure`, `worked`, `too_little` or `overshot`.
    pub effect: String,
}

impl From<&Notice> for NoticeBody {
    fn from(notice: &Notice) -> Self {
        let Notice {
            id,
            plant,
            bank,
            kind,
            state,
            priority,
            sources,
            unit,
            since,
            raised,
            changed,
            returned,
            acknowledged,
            subject,
            text,
            advice,
            url,
            span,
            handling,
            pattern,
            slip,
            common_movement,
            even_mean,
            cost_per_hour,
            adjustment,
        } = notice;
        Self {
            id: id.to_string(),
            plant: plant.to_string(),
            bank: bank.to_string(),
            kind: kind.word().to_owned(),
            state: state.word().to_owned(),
            priority: priority.word().to_owned(),
            sources: sources.iter().map(named_source).collect(),
            unit: unit.to_string(),
            since: since_body(*since),
            raised: *raised,
            changed: *changed,
            returned: *returned,
            acknowledged: acknowledged.as_ref().map(acknowledgement),
            subject: subject.clone(),
            text: text.clone(),
            advice: advice.clone(),
            url: url.clone(),
            span: *span,
            holds: notice.holds(),
            shelved_until: handling.shelved_until,
            outcome: handling.outcome.map(|o| o.word().to_owned()),
            log: handling.entries.iter().map(EntryBody::from).collect(),
            pattern: pattern.as_ref().map(pattern_body),
            slip: slip.map(slip_body),
            common_movement: common_movement.and_then(finite),
            even_mean: even_mean.and_then(finite),
            cost_per_hour: cost_per_hour.and_then(finite),
            adjustment: adjustment.as_ref().map(adjustment_body),
        }
    }
}

impl From<Notice> for NoticeBody {
    fn from(notice: Notice) -> Self {
        Self::from(&notice)
    }
}

fn named_source(named: &NamedSource) -> NamedSourceBody {
    let NamedSource {
        source,
        deviation,
        low,
        high,
    } = named;
    NamedSourceBody {
        source: source.to_string(),
        deviation: finite(*deviation),
        low: finite(*low),
        high: finite(*high),
    }
}

fn pattern_body(pattern: &Pattern) -> PatternBody {
    let Pattern {
        kind,
        effect,
        p,
        words,
    } = pattern;
    PatternBody {
        kind: kind.word().to_owned(),
        words: words.clone(),
        effect: finite(effect.value),
        low: finite(effect.low),
        high: finite(effect.high),
        p: finite(*p),
        highest: kind.highest().map(ToString::to_string),
        group: kind.group().map(ToString::to_string),
    }
}

fn adjustment_body(adjustment: &Adjustment) -> AdjustmentBody {
    let Adjustment {
        source,
        at,
        amount,
        values,
        deviation,
        effect,
    } = adjustment;
    AdjustmentBody {
        source: source.to_string(),
        at: *at,
        amount: amount.and_then(finite),
        values: *values,
        deviation: deviation.map(Into::into),
        effect: word(effect),
    }
}

fn slip_body(Slip { places, fit }: Slip) -> SlipBody {
    SlipBody {
        places,
        fit: finite(fit),
    }
}

fn since_body(
    Since {
        at,
        earliest,
        latest,
    }: Since,
) -> SinceBody {
    SinceBody {
        at,
        earliest,
        latest,
    }
}

fn acknowledgement(Acknowledgement { by, at, comment }: &Acknowledgement) -> AcknowledgementBody {
    AcknowledgementBody {
        by: by.to_string(),
        at: *at,
        comment: comment.clone(),
    }
}
