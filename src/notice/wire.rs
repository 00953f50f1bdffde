//! The notice as others read it: the one JSON form that pages' interface and outlets share.
//!
//! Owns the names of the fields, which plants build on: a field is added, never renamed or given
//! another meaning. Borrowed from the [`Notice`], so nothing is copied. Deliberately absent: the
//! envelope (that is the outlet's) and reading it back.

use serde::Serialize;

use crate::model::Time;
use crate::verdict::{Pattern, Slip};

use super::{
    Acknowledgement, Adjustment, CallOutcome, Kind, NamedSource, Notice, Priority, Since, State,
};

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
    /// What in the machine's geometry explains it; null when nothing does.
    pub pattern: Option<PatternData<'a>>,
    /// By how many places all sources seem to have slipped; null when they do not.
    pub slip: Option<Slip>,
    /// How far the sources that stayed moved together since the start, in the bank's unit.
    pub common_movement: Option<f64>,
    /// Mean of the sources that the named ones are compared with, in the bank's unit.
    pub even_mean: Option<f64>,
    /// What the bank gives away in an hour, in the currency of `cost_per_unit`; null without that.
    pub cost_per_hour: Option<f64>,
    /// The last adjustment of a named source since it left, and what became of it; null without one.
    pub adjustment: Option<&'a Adjustment>,
}

/// A pattern in its shared form: flat, so that a template can read it.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct PatternData<'a> {
    /// `wave`, `slope`, `odd_from_even`, `half_from_half` or `group`.
    pub kind: &'static str,
    /// What it is, for people, without its size.
    pub words: &'a str,
    /// Its size in the bank's unit.
    pub effect: f64,
    /// Lower end of the interval.
    pub low: f64,
    /// Upper end.
    pub high: f64,
    /// Probability of as large a one by chance.
    pub p: f64,
    /// The source at which a wave is highest.
    pub highest: Option<&'a str>,
    /// The configured group.
    pub group: Option<&'a str>,
}

impl<'a> PatternData<'a> {
    fn of(pattern: &'a Pattern) -> Self {
        let Pattern {
            kind,
            effect,
            p,
            words,
        } = pattern;
        Self {
            kind: kind.word(),
            words,
            effect: effect.value,
            low: effect.low,
            high: effect.high,
            p: *p,
            highest: kind.highest().map(|n| &**n),
            group: kind.group().map(|n| &**n),
        }
    }
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
            pattern,
            slip,
            common_movement,
            even_mean,
            cost_per_hour,
            adjustment,
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
            pattern: pattern.as_ref().map(PatternData::of),
            slip: *slip,
            common_movement: *common_movement,
            even_mean: *even_mean,
            cost_per_hour: *cost_per_hour,
            adjustment: adjustment.as_ref(),
        }
    }
}

#[cfg(test)]
mod tests {
    use crate::verdict::{Effect, Estimate, PatternKind};

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
            pattern: Some(Pattern {
                kind: PatternKind::Wave {
                    highest: "01".into(),
                    lowest: "07".into(),
                },
                effect: Estimate {
                    value: 1.25,
                    low: 1.0,
                    high: 1.5,
                },
                p: 0.0001,
                words: "one wave around the ring".to_owned(),
            }),
            slip: Some(Slip {
                places: 1,
                fit: 0.5,
            }),
            common_movement: Some(-0.25),
            even_mean: Some(503.5),
            cost_per_hour: Some(12.5),
            adjustment: Some(Adjustment {
                source: "07".into(),
                at: at(150),
                amount: Some(1.5),
                values: 20,
                deviation: Some(Estimate {
                    value: -0.25,
                    low: -0.5,
                    high: 0.0,
                }),
                effect: Effect::NotSure,
            }),
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
            "outcome": null,
            "pattern": {
                "kind": "wave",
                "words": "one wave around the ring",
                "effect": 1.25,
                "low": 1.0,
                "high": 1.5,
                "p": 0.0001,
                "highest": "01",
                "group": null
            },
            "slip": {"places": 1, "fit": 0.5},
            "common_movement": -0.25,
            "even_mean": 503.5,
            "cost_per_hour": 12.5,
            "adjustment": {
                "source": "07",
                "at": "1970-01-01T00:02:30Z",
                "amount": 1.5,
                "values": 20,
                "deviation": {"value": -0.25, "low": -0.5, "high": 0.0},
                "effect": "not_sure"
            }
        });
        assert_eq!(json, wanted);
    }
}
