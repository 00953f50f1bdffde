//! Banks, their sources, windows and refusals.

use std::collections::BTreeMap;

use serde::Serialize;
use utoipa::ToSchema;

use crate::engine::{BankView, RefusalView, SourceView, WindowView};
use crate::model::{Refusal, Time, US_PER_S};
use crate::verdict::BudgetKept;

use super::{EstimateBody, LookBody, NoticeBody, WatchBody, finite};

/// A bank in the list of banks.
#[derive(Debug, Serialize, ToSchema)]
pub struct BankBody {
    /// Its name.
    pub name: String,
    /// The machine it belongs to.
    pub equipment: Option<String>,
    /// What is measured.
    pub characteristic: String,
    /// The unit of values, margin and deviations.
    pub unit: String,
    /// Largest difference between two sources that does not matter.
    pub margin: f64,
    /// Largest ratio of two standard deviations that does not matter.
    pub spread_margin: f64,
    /// False calls allowed.
    pub false_calls: String,
    /// Lengths of the looks' windows.
    pub spans: Vec<usize>,
    /// How the bank stands in one word, as on the plant's page.
    pub standing: String,
    /// Names of its open notices.
    pub open_notices: Vec<String>,
    /// Mean of all sources over the span that stands for now.
    pub mean: Option<f64>,
    /// Newest time of a measurement that was taken in.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub newest_taken: Option<Time>,
    /// Measurements since the process started by outcome.
    pub outcomes: BTreeMap<String, u64>,
    /// Whether the bank kept its call budget, by what people said came of its calls.
    pub budget_kept: Option<BudgetKeptBody>,
}

/// A bank with its sources and newest looks.
#[derive(Debug, Serialize, ToSchema)]
pub struct BankWholeBody {
    /// What the list says of it.
    #[serde(flatten)]
    pub bank: BankBody,
    /// Its sources in display order.
    pub sources: Vec<SourceBody>,
    /// The newest look of each span, shortest first.
    pub looks: Vec<LookBody>,
    /// The watch; `null` where sources share no cycle, because the looks decide there.
    pub watch: Option<WatchBody>,
    /// Its open notices, newest first.
    pub notices: Vec<NoticeBody>,
}

/// A bank's calls beside its budget.
#[derive(Debug, Serialize, ToSchema)]
pub struct BudgetKeptBody {
    /// `kept`, `agrees` (with the budget, and with worse) or `broken`.
    pub keeping: &'static str,
    /// Calls made.
    pub calls: u64,
    /// Calls of which somebody said what came of them.
    pub told: u64,
    /// Calls with nothing found.
    pub nothing_found: u64,
    /// Days watched.
    pub days: f64,
    /// False calls that the budget allows in that time.
    pub allowed: f64,
    /// Lower one-sided 95 % limit of the false calls to be expected in that time (Poisson).
    pub low: f64,
    /// Upper limit.
    pub high: f64,
}

impl From<&BudgetKept> for BudgetKeptBody {
    fn from(kept: &BudgetKept) -> Self {
        let BudgetKept {
            calls,
            told,
            nothing_found,
            days,
            allowed,
            low,
            high,
            keeping,
        } = *kept;
        Self {
            keeping: keeping.word(),
            calls,
            told,
            nothing_found,
            days,
            allowed,
            low,
            high,
        }
    }
}

/// A source, now.
#[derive(Debug, Serialize, ToSchema)]
pub struct SourceBody {
    /// Its name.
    pub source: String,
    /// `awaited`, `new`, `present` or `silent`.
    pub state: String,
    /// Values in its window.
    pub values: usize,
    /// The newest value.
    pub last_value: Option<f64>,
    /// When that was taken.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub last_taken: Option<Time>,
    /// When anything last arrived.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub last_received: Option<Time>,
    /// Deviation from the even set without it, in the unit.
    pub deviation: Option<EstimateBody>,
    /// The same in standard deviations within sources.
    pub deviation_sigmas: Option<f64>,
    /// Ratio of its standard deviation to the others'.
    pub sd_ratio: Option<EstimateBody>,
    /// The kinds of open notices that name it.
    pub named: Vec<String>,
    /// Received minus taken, the median of the newest values, in seconds; negative where its clock is
    /// ahead.
    pub lag_s: Option<f64>,
}

impl BankBody {
    /// From the present and the word for how the bank stands.
    pub fn new(view: &BankView, standing: &str) -> Self {
        let bank = &view.bank;
        let open = view.open.iter().map(|n| n.id.to_string());
        let outcomes = view.outcomes.iter().map(|(k, n)| ((*k).to_owned(), *n));
        Self {
            name: bank.name.to_string(),
            equipment: bank.equipment.as_ref().map(ToString::to_string),
            characteristic: bank.characteristic.name.to_string(),
            unit: bank.characteristic.unit.to_string(),
            margin: bank.margin,
            spread_margin: bank.spread_margin,
            false_calls: bank.budget.to_string(),
            spans: bank.spans.clone(),
            standing: standing.to_owned(),
            open_notices: open.collect(),
            mean: view.mean.and_then(finite),
            newest_taken: view.newest_taken,
            outcomes: outcomes.collect(),
            budget_kept: view.kept.as_ref().map(BudgetKeptBody::from),
        }
    }
}

impl BankWholeBody {
    /// From the present.
    pub fn new(view: &BankView, standing: &str) -> Self {
        Self {
            bank: BankBody::new(view, standing),
            sources: view.sources.iter().map(source).collect(),
            looks: view
                .looks
                .iter()
                .map(|l| LookBody::from(l.as_ref()))
                .collect(),
            watch: WatchBody::of(view),
            notices: view
                .open
                .iter()
                .map(|n| NoticeBody::from(n.as_ref()))
                .collect(),
        }
    }
}

impl From<&SourceView> for SourceBody {
    fn from(view: &SourceView) -> Self {
        source(view)
    }
}

fn source(view: &SourceView) -> SourceBody {
    let SourceView {
        source: _,
        name,
        state,
        values,
        last_value,
        last_taken,
        last_received,
        deviation,
        deviation_sigmas,
        sd_ratio,
        named,
        lag_us,
    } = view;
    SourceBody {
        source: name.to_string(),
        state: state.word().to_owned(),
        values: *values,
        last_value: last_value.and_then(finite),
        last_taken: *last_taken,
        last_received: *last_received,
        deviation: deviation.map(Into::into),
        deviation_sigmas: deviation_sigmas.and_then(finite),
        sd_ratio: sd_ratio.map(Into::into),
        named: named.iter().map(|k| k.word().to_owned()).collect(),
        lag_s: lag_us.map(|us| us as f64 / US_PER_S as f64),
    }
}

/// One source's window.
#[derive(Debug, Serialize, ToSchema)]
pub struct WindowBody {
    /// The source.
    pub source: String,
    /// To be added to every offset, as exact decimal text.
    pub origin: String,
    /// The values, oldest first.
    pub values: Vec<WindowValueBody>,
}

/// One value in a window.
#[derive(Debug, Serialize, ToSchema)]
pub struct WindowValueBody {
    /// When it was taken.
    #[schema(value_type = String, format = DateTime)]
    pub taken: Time,
    /// Its cycle or slot, where the bank pairs.
    pub cycle: Option<i64>,
    /// The value.
    pub value: Option<f64>,
    /// The value less the origin, subtracted in decimal.
    pub offset: Option<f64>,
}

impl From<WindowView> for WindowBody {
    fn from(window: WindowView) -> Self {
        let origin = window.origin.to_f64();
        let values = window.values.into_iter().map(|v| WindowValueBody {
            taken: v.taken,
            cycle: v.cycle,
            value: finite(origin + v.offset),
            offset: finite(v.offset),
        });
        Self {
            source: window.source.to_string(),
            origin: window.origin.to_string(),
            values: values.collect(),
        }
    }
}

/// The last refusal of one kind.
#[derive(Debug, Serialize, ToSchema)]
pub struct RefusalBody {
    /// Why, in one word.
    pub reason: String,
    /// How many since the process started.
    pub count: u64,
    /// When the last one arrived.
    #[schema(value_type = String, format = DateTime)]
    pub at: Time,
    /// The topic it came on.
    pub topic: String,
    /// What exactly was wrong.
    pub detail: String,
    /// The start of the payload, made printable.
    pub excerpt: String,
}

impl From<&RefusalView> for RefusalBody {
    fn from(view: &RefusalView) -> Self {
        let RefusalView {
            reason,
            count,
            last,
            at,
        } = view;
        let Refusal {
            bank: _,
            reason: _,
            topic,
            detail,
            excerpt,
        } = last;
        Self {
            reason: reason.word().to_owned(),
            count: *count,
            at: *at,
            topic: topic.to_string(),
            detail: detail.clone(),
            excerpt: excerpt.clone(),
        }
    }
}
