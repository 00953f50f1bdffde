//! The notice as others read it: the one JSON form that pages' interface and outlets share.
//!
//! Owns the names of the fields, which plants build on: a field is added, never renamed or given
//! another meaning. Borrowed from the [`Notice`], so nothing is copied. Deliberately absent: the
//! envelope (that is the outlet's) and reading it back.

use serde::Serialize;

use crate::model::Time;

use super::{Acknowledgement, CallOutcome, Kind, NamedSource, Notice, Priority, Since, State};

/// The `data` of a notice's event, and a notice in the interface.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct NoticeData<'a> {
    /// [`Notice::id`].
    pub id: &'a str,
    /// The plant.
    pub plant: &'a str,
    /// The bank.
    pub bank: &'a str,
    /// What it is about.
    pub kind: Kind,
    /// Where it stands.
    pub state: State,
    /// How soon to act.
    pub priority: Priority,
    /// One line for a lock screen.
    pub subject: &'a str,
    /// The sources named, largest deviation first, each with its interval in `unit`.
    pub sources: &'a [NamedSource],
    /// The unit of the deviations.
    pub unit: &'a str,
    /// Since when, with the earliest and latest start that the data allow.
    pub since: Since,
    /// What to check or adjust.
    pub advice: &'a str,
    /// The whole text.
    pub text: &'a str,
    /// Where a person sees more.
    pub url: &'a str,
    /// When the call was made.
    pub raised: Time,
    /// When anything in it last changed.
    pub changed: Time,
    /// When the condition was last seen to be gone; null while it holds.
    pub returned: Option<Time>,
    /// Who acknowledged it; null while nobody has.
    pub acknowledged: Option<&'a Acknowledgement>,
    /// Values per source in the look that called.
    pub span: usize,
    /// Until when it is shelved; null while it is not.
    pub shelved_until: Option<Time>,
    /// What came of it; null while nobody has said.
    pub outcome: Option<CallOutcome>,
}

impl<'a> NoticeData<'a> {
    /// The notice in its shared form.
    pub fn of(notice: &'a Notice) -> Self {
        // Taken apart in full, so that a new field of a notice cannot be forgotten here.
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
            id,
            plant,
            bank,
            kind: *kind,
            state: *state,
            priority: *priority,
            subject,
            sources,
            unit,
            since: *since,
            advice,
            text,
            url,
            raised: *raised,
            changed: *changed,
            returned: *returned,
            acknowledged: acknowledged.as_ref(),
            span: *span,
            shelved_until: handling.shelved_until,
            outcome: handling.outcome,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn notice() -> Notice {
        let at = |s: i64| Time::from_us(s * 1_000_000);
        Notice {
            id: "filler-2-2026-0001".into(),
            plant: "Quayside".into(),
            bank: "filler-2".into(),
            kind: Kind::LevelApart,
            state: State::Acknowledged,
            priority: Priority::Medium,
            sources: vec![NamedSource {
                source: "07".into(),
                deviation: -1.25,
                low: -1.5,
                high: -1.0,
            }],
            unit: "g".into(),
            since: Since {
                at: at(60),
                earliest: at(30),
                latest: at(90),
            },
            raised: at(120),
            changed: at(180),
            returned: None,
            acknowledged: Some(Acknowledgement {
                by: "Ana".into(),
                at: at(180),
                comment: String::new(),
            }),
            subject: "filler-2: 07 low by 1.3 g".into(),
            text: "Source 07 is low.".into(),
            advice: "Check valve 07.".into(),
            url: "http://127.0.0.1:7310/banks/filler-2".into(),
            span: 40,
            handling: crate::notice::Handling::default(),
        }
    }

    #[test]
    fn the_fields_that_plants_build_on_are_there_under_their_names() {
        let notice = notice();
        let json = serde_json::to_value(NoticeData::of(&notice)).unwrap();
        let wanted = serde_json::json!({
            "id": "filler-2-2026-0001",
            "plant": "Quayside",
            "bank": "filler-2",
            "kind": "level_apart",
            "state": "acknowledged",
            "priority": "medium",
            "subject": "filler-2: 07 low by 1.3 g",
            "sources": [{"source": "07", "deviation": -1.25, "low": -1.5, "high": -1.0}],
            "unit": "g",
            "since": {
                "at": "1970-01-01T00:01:00Z",
                "earliest": "1970-01-01T00:00:30Z",
                "latest": "1970-01-01T00:01:30Z"
            },
            "advice": "Check valve 07.",
            "text": "Source 07 is low.",
            "url": "http://127.0.0.1:7310/banks/filler-2",
            "raised": "1970-01-01T00:02:00Z",
            "changed": "1970-01-01T00:03:00Z",
            "returned": null,
            "acknowledged": {"by": "Ana", "at": "1970-01-01T00:03:00Z", "comment": ""},
            "span": 40,
            "shelved_until": null,
            "outcome": null
        });
        assert_eq!(json, wanted);
    }
}
