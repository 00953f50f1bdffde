//! The JSON forms of looks, notices, banks, windows and refusals: what the interface answers and what
//! `rehearse --json` writes.
//!
//! What must hold: names and meanings stay, new fields may be added; figures have full precision, and
//! one that is no finite number is `null`; times are RFC 3339 in UTC. Each form is filled by full
//! destructuring where it copies a struct, so that a new field cannot be forgotten.

mod bank;
mod deed;
mod explanation;
mod health;
mod line;
mod look;
mod notice;
mod rows;
mod setting;
mod watch;

pub use bank::{
    BankBody, BankWholeBody, BudgetKeptBody, RefusalBody, SourceBody, WindowBody, WindowValueBody,
};
pub use deed::{AcknowledgeBody, CommentBody, EntryBody, SaidBody, ShelveBody};
pub use explanation::{
    CallApartBody, ExplanationBody, PartBody, PlaceBody, SpanBody, StepBody, WatchApartBody,
    WorkedPairBody, WorkedTestBody,
};
pub use health::{HealthBody, OutletBody};
pub use line::{LineEntryBody, LineEventBody, LineKind};
pub use look::{DependenceBody, DeviationBody, DigestBody, LookBody, SourceLookBody, TestBody};
pub use notice::{AcknowledgementBody, NamedSourceBody, NoticeBody, SinceBody};
pub use rows::Rows;
pub use setting::SettingBody;
pub use watch::{WatchBody, WatchPartBody};

use serde::Serialize;
use utoipa::ToSchema;

use crate::engine::Page;
use crate::verdict::Estimate;

/// A figure, or nothing where it is no finite number.
fn finite(x: f64) -> Option<f64> {
    x.is_finite().then_some(x)
}

/// The word of something that serialises as one.
fn word(what: impl Serialize) -> String {
    match serde_json::to_value(what) {
        Ok(serde_json::Value::String(word)) => word,
        _ => String::new(),
    }
}

/// A part of a list.
#[derive(Debug, Serialize, ToSchema)]
pub struct List<T> {
    /// The items.
    pub items: Vec<T>,
    /// Give this as `after` to get the next part; `null` at the end.
    pub next: Option<String>,
}

impl<T> List<T> {
    /// A list that is whole.
    pub fn whole(items: Vec<T>) -> Self {
        Self { items, next: None }
    }

    /// A part of the history.
    pub fn part<F: Into<T>>(page: Page<F>) -> Self {
        Self {
            items: page.items.into_iter().map(Into::into).collect(),
            next: page.next,
        }
    }
}

/// A figure with its simultaneous 95 % interval.
#[derive(Debug, Serialize, ToSchema)]
pub struct EstimateBody {
    /// The figure.
    pub value: Option<f64>,
    /// Lower end.
    pub low: Option<f64>,
    /// Upper end.
    pub high: Option<f64>,
}

impl From<Estimate> for EstimateBody {
    fn from(Estimate { value, low, high }: Estimate) -> Self {
        Self {
            value: finite(value),
            low: finite(low),
            high: finite(high),
        }
    }
}
