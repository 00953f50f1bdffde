//! What people do with a notice, as it is sent and shown.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use crate::model::Time;
use crate::notice::{Act, Entry};

/// What an acknowledgement says.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct AcknowledgeBody {
    /// The person's name, on one line.
    #[schema(
        min_length = 1,
        max_length = 80,
        pattern = "^[^\\x00-\\x1f\\x7f-\\x9f]*[^\\s\\x00-\\x1f\\x7f-\\x9f][^\\x00-\\x1f\\x7f-\\x9f]*$"
    )]
    pub by: String,
    /// Anything worth saying.
    #[schema(max_length = 2000)]
    #[serde(default)]
    pub comment: String,
    /// What came of it: `found_and_corrected`, `real_but_left`, `nothing_found` or
    /// `instrument_or_data`.
    #[serde(default)]
    pub outcome: Option<String>,
}

/// A comment, or what came of a notice.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct CommentBody {
    /// The person's name, on one line.
    #[schema(
        min_length = 1,
        max_length = 80,
        pattern = "^[^\\x00-\\x1f\\x7f-\\x9f]*[^\\s\\x00-\\x1f\\x7f-\\x9f][^\\x00-\\x1f\\x7f-\\x9f]*$"
    )]
    pub by: String,
    /// The comment; may be empty where an outcome is given.
    #[schema(max_length = 2000)]
    #[serde(default)]
    pub comment: String,
    /// What came of it: `found_and_corrected`, `real_but_left`, `nothing_found` or
    /// `instrument_or_data`.
    #[serde(default)]
    pub outcome: Option<String>,
}

/// Setting a notice aside for a time.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct ShelveBody {
    /// The person's name, on one line.
    #[schema(
        min_length = 1,
        max_length = 80,
        pattern = "^[^\\x00-\\x1f\\x7f-\\x9f]*[^\\s\\x00-\\x1f\\x7f-\\x9f][^\\x00-\\x1f\\x7f-\\x9f]*$"
    )]
    pub by: String,
    /// Why.
    #[schema(max_length = 2000)]
    #[serde(default)]
    pub comment: String,
    /// For how long, in minutes; at most what the plant allows.
    pub for_minutes: u32,
    /// Until it returns at the latest.
    #[serde(default)]
    pub once: bool,
}

/// Who does something, and why.
#[derive(Debug, Deserialize, ToSchema)]
#[serde(deny_unknown_fields)]
pub struct SaidBody {
    /// The person's name, on one line.
    #[schema(
        min_length = 1,
        max_length = 80,
        pattern = "^[^\\x00-\\x1f\\x7f-\\x9f]*[^\\s\\x00-\\x1f\\x7f-\\x9f][^\\x00-\\x1f\\x7f-\\x9f]*$"
    )]
    pub by: String,
    /// Why.
    #[schema(max_length = 2000)]
    #[serde(default)]
    pub comment: String,
}

/// One entry of a notice's record.
#[derive(Debug, Serialize, ToSchema)]
pub struct EntryBody {
    /// The person; `evenrow` for what happened by itself.
    pub by: String,
    /// When.
    #[schema(value_type = String, format = DateTime)]
    pub at: Time,
    /// `acknowledged`, `shelved`, `unshelved`, `shelving_over`, `out_of_service`, `in_service`, `outcome`
    /// or `comment`.
    pub act: &'static str,
    /// Until when, of a shelving.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub until: Option<Time>,
    /// What came of it, of an outcome.
    pub outcome: Option<&'static str>,
    /// What the person wrote.
    pub comment: String,
}

impl From<&Entry> for EntryBody {
    fn from(
        Entry {
            by,
            at,
            act,
            comment,
        }: &Entry,
    ) -> Self {
        Self {
            by: by.to_string(),
            at: *at,
            act: act.word(),
            until: match act {
                Act::Shelved(until, _) => Some(*until),
                _ => None,
            },
            outcome: match act {
                Act::Told(outcome) => Some(outcome.word()),
                _ => None,
            },
            comment: comment.clone(),
        }
    }
}
