//! The watch of a bank.

use serde::Serialize;
use utoipa::ToSchema;

use crate::engine::{BankView, WatchView};
use crate::verdict::watch::Progress;

use super::finite;

/// The watch, now.
#[derive(Debug, Serialize, ToSchema)]
pub struct WatchBody {
    /// `watching`, `learning`, `still` (no source scatters) or `alone` (fewer than two sources).
    pub state: &'static str,
    /// Cycles learnt from, while it learns.
    pub learnt_cycles: Option<u32>,
    /// Cycles that learning takes.
    pub needed_cycles: Option<u32>,
    /// Learnt standard deviation of a single value, in the unit.
    pub sigma: Option<f64>,
    /// Learnt correlation of neighbouring cycles.
    pub phi: Option<f64>,
    /// Mean number of cycles to a false call that the budget allows at this pace.
    pub cycles_per_false_call: Option<f64>,
    /// How far each part is from its threshold; empty while it learns.
    pub parts: Vec<WatchPartBody>,
}

/// One part of the watch.
#[derive(Debug, Serialize, ToSchema)]
pub struct WatchPartBody {
    /// `few`, `split`, `pair`, `erratic` or `quiet`.
    pub part: &'static str,
    /// Its statistic, on the scale of standard deviations.
    pub statistic: Option<f64>,
    /// Its threshold.
    pub threshold: Option<f64>,
    /// Statistic over threshold; above 1 it calls.
    pub ratio: Option<f64>,
    /// The source that it points to most.
    pub source: Option<String>,
}

impl WatchBody {
    /// From the present; `None` where sources share no cycle.
    pub fn of(view: &BankView) -> Option<Self> {
        let WatchView {
            progress,
            readings,
            figures,
        } = view.watch.as_ref()?;
        let (state, learnt_cycles, needed_cycles) = match progress {
            Progress::Watching => ("watching", None, None),
            Progress::Learning { cycles, needed } => ("learning", Some(*cycles), Some(*needed)),
            Progress::Still => ("still", None, None),
            Progress::Alone => ("alone", None, None),
        };
        let named = |s: crate::model::SourceIx| {
            let source = view.sources.iter().find(|v| v.source == s)?;
            Some(source.name.to_string())
        };
        let part = |r: &crate::verdict::watch::Reading| WatchPartBody {
            part: r.part.key(),
            statistic: finite(r.statistic),
            threshold: finite(r.threshold),
            ratio: finite(r.ratio),
            source: r.leading.and_then(named),
        };
        let account = figures.account.as_ref();
        Some(Self {
            state,
            learnt_cycles,
            needed_cycles,
            sigma: figures.sigma.and_then(finite),
            phi: finite(figures.phi),
            cycles_per_false_call: account.and_then(|a| finite(a.basis.cycles_per_false_call)),
            parts: readings.iter().map(part).collect(),
        })
    }
}
