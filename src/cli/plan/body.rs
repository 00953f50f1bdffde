//! The plan as JSON: one object on one line, figures in full precision, times in seconds.

use serde::Serialize;

use super::Plan;
use super::outcome::{Figure, Outcome, Worth};
use super::work::{Judged, Tried};

/// The whole.
#[derive(Debug, Serialize)]
pub struct PlanBody {
    bank: String,
    unit: String,
    sources: usize,
    decides: &'static str,
    assumed: AssumedBody,
    settings: Vec<SettingBody>,
}

#[derive(Debug, Serialize)]
struct AssumedBody {
    sd: f64,
    own_sd: Vec<f64>,
    correlation: f64,
    interval_s: f64,
    from: String,
}

#[derive(Debug, Serialize)]
struct SettingBody {
    setting: &'static str,
    margin: f64,
    spread_margin: f64,
    false_calls: String,
    spans: Vec<usize>,
    cycles_per_false_call: Option<f64>,
    drifts: Vec<DriftBody>,
}

#[derive(Debug, Serialize)]
struct DriftBody {
    drift: &'static str,
    /// Sds beyond the configured margin, or times the configured spread margin.
    beyond: f64,
    /// In the unit, or a ratio of sds.
    size: f64,
    /// `null` where this setting's margins call it no difference.
    found: Option<FoundBody>,
}

#[derive(Debug, Serialize)]
struct FoundBody {
    trials: usize,
    /// `estimate` or `bound` (at least as surely and as soon).
    worth: &'static str,
    within_10_min: FigureBody,
    within_1_h: FigureBody,
    within_8_h: FigureBody,
    median_s: Option<FigureBody>,
    ninety_s: Option<FigureBody>,
}

#[derive(Debug, Serialize)]
struct FigureBody {
    value: f64,
    std_error: f64,
}

impl PlanBody {
    /// From what was found.
    pub fn of(plan: &Plan) -> Self {
        let Plan {
            bank,
            assumed,
            judged,
        } = plan;
        Self {
            bank: bank.name.to_string(),
            unit: bank.characteristic.unit.to_string(),
            sources: assumed.sources,
            decides: if bank.pairing.is_paired() {
                "watch"
            } else {
                "look"
            },
            assumed: AssumedBody {
                sd: assumed.sd,
                own_sd: assumed.own_sd.clone(),
                correlation: assumed.phi,
                interval_s: seconds(assumed.interval_us as f64),
                from: assumed.from.clone(),
            },
            settings: judged.iter().map(setting).collect(),
        }
    }
}

fn setting(judged: &Judged) -> SettingBody {
    let bank = &judged.setting.bank;
    SettingBody {
        setting: judged.setting.variation.key(),
        margin: bank.margin,
        spread_margin: bank.spread_margin,
        false_calls: bank.budget.to_string(),
        spans: bank.spans.clone(),
        cycles_per_false_call: judged.cycles_per_false_call,
        drifts: judged.tried.iter().map(drift).collect(),
    }
}

fn drift(tried: &Tried) -> DriftBody {
    DriftBody {
        drift: tried.scene.drift.key(),
        beyond: tried.scene.beyond,
        size: tried.scene.size,
        found: tried.outcome.as_ref().map(found),
    }
}

fn found(outcome: &Outcome) -> FoundBody {
    let Outcome {
        trials,
        within,
        median_us,
        ninety_us,
        worth,
    } = outcome;
    let plain = |f: &Figure| FigureBody {
        value: f.value,
        std_error: f.error,
    };
    let time = |f: &Figure| FigureBody {
        value: seconds(f.value),
        std_error: seconds(f.error),
    };
    FoundBody {
        trials: *trials,
        worth: match worth {
            Worth::Estimate => "estimate",
            Worth::Bound => "bound",
        },
        within_10_min: plain(&within[0]),
        within_1_h: plain(&within[1]),
        within_8_h: plain(&within[2]),
        median_s: median_us.as_ref().map(time),
        ninety_s: ninety_us.as_ref().map(time),
    }
}

fn seconds(us: f64) -> f64 {
    us / 1e6
}
