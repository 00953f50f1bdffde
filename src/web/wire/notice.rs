//! Notices.

use serde::Serialize;
use utoipa::ToSchema;

use crate::model::Time;
use crate::notice::{Acknowledgement, NamedSource, Notice, Since};

use super::{EntryBody, finite};

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
