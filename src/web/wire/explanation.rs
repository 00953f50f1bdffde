//! A look and a call taken apart: what `explain` shows, and what the interface answers.
//!
//! Read back by `evenrow explain`, so these forms both write and read.

use std::fmt::Write as _;

use serde::de::Error as _;
use serde::{Deserialize, Deserializer, Serialize};
use serde_json::value::RawValue;
use utoipa::ToSchema;

use crate::engine::{Evidence, Premises, WatchSaid, WindowView};
use crate::model::{LineEvent, Name, SourceIx, Time};
use crate::verdict::{Aspect, Examination, Finding, Look, Worked, WorkedPair, WorkedTest};

use super::{finite, word};

/// A figure to its last bit: serde_json's own reading of decimals may miss by one.
fn exact<'de, D: Deserializer<'de>>(from: D) -> Result<f64, D::Error> {
    let number: Box<RawValue> = Deserialize::deserialize(from)?;
    number.get().parse().map_err(D::Error::custom)
}

/// The same where there may be none.
fn exact_or_none<'de, D: Deserializer<'de>>(from: D) -> Result<Option<f64>, D::Error> {
    let number: Box<RawValue> = Deserialize::deserialize(from)?;
    match number.get() {
        "null" => Ok(None),
        text => text.parse().map(Some).map_err(D::Error::custom),
    }
}

/// A figure on the way to a test's result.
#[derive(Debug, Serialize, Deserialize, ToSchema)]
pub struct StepBody {
    /// What it is.
    pub what: String,
    /// The figure.
    #[serde(deserialize_with = "exact_or_none")]
    pub value: Option<f64>,
}

/// A test with its sums.
#[derive(Debug, Serialize, Deserialize, ToSchema)]
pub struct WorkedTestBody {
    /// Its key, as in a look.
    pub test: String,
    /// Its name.
    pub name: String,
    /// Whether it takes part in the decision.
    pub decides: bool,
    /// The sums in the order in which one works them out.
    pub steps: Vec<StepBody>,
}

/// A pair of sources beyond the margin.
#[derive(Debug, Serialize, Deserialize, ToSchema)]
pub struct WorkedPairBody {
    /// The one with the larger mean.
    pub above: String,
    /// The other.
    pub below: String,
    /// Difference of their means, in the unit.
    #[serde(deserialize_with = "exact_or_none")]
    pub difference: Option<f64>,
    /// Its standard error, dependence paid.
    #[serde(deserialize_with = "exact_or_none")]
    pub std_error: Option<f64>,
    /// Degrees of freedom, dependence paid.
    #[serde(deserialize_with = "exact_or_none")]
    pub df: Option<f64>,
    /// What does not matter between the two, in the unit.
    #[serde(deserialize_with = "exact")]
    pub margin: f64,
    /// sqrt(2) (difference − margin) / standard error.
    #[serde(deserialize_with = "exact_or_none")]
    pub q: Option<f64>,
    /// Probability of any pair as far beyond its margin.
    #[serde(deserialize_with = "exact_or_none")]
    pub p: Option<f64>,
    /// Lower end of the simultaneous interval at the look's own level, in the unit.
    #[serde(deserialize_with = "exact_or_none")]
    pub low: Option<f64>,
}

/// A source's place in the order of means.
#[derive(Debug, Serialize, Deserialize, ToSchema)]
pub struct PlaceBody {
    /// The source.
    pub source: String,
    /// Its mean about the origin, cycle means taken off where sources share cycles, in the unit.
    #[serde(deserialize_with = "exact_or_none")]
    pub mean: Option<f64>,
    /// Whether it belongs to the even set.
    pub even: bool,
}

/// A look over one span, taken apart.
#[derive(Debug, Serialize, Deserialize, ToSchema)]
pub struct SpanBody {
    /// Values per source.
    pub span: usize,
    /// What the look found.
    pub finding: String,
    /// Why nothing could be concluded, or what to mind.
    pub remark: String,
    /// Probability of a false call that level may spend at this look.
    #[serde(deserialize_with = "exact")]
    pub alpha_level: f64,
    /// The same for spread.
    #[serde(deserialize_with = "exact")]
    pub alpha_spread: f64,
    /// The tests, deciding ones first.
    pub tests: Vec<WorkedTestBody>,
    /// Pairs beyond the margin, the clearest first.
    pub pairs: Vec<WorkedPairBody>,
    /// The sources by their means, lowest first.
    pub order: Vec<PlaceBody>,
    /// Error rate of the names.
    #[serde(deserialize_with = "exact_or_none")]
    pub naming_alpha: Option<f64>,
}

/// A part of the watch.
#[derive(Debug, Serialize, Deserialize, ToSchema)]
pub struct PartBody {
    /// `few`, `split`, `pair`, `erratic` or `quiet`.
    pub part: String,
    /// Its statistic, on the scale of standard deviations.
    #[serde(deserialize_with = "exact_or_none")]
    pub statistic: Option<f64>,
    /// Its threshold there.
    #[serde(deserialize_with = "exact_or_none")]
    pub threshold: Option<f64>,
    /// The source that it points to most.
    pub source: Option<String>,
    /// Its share of the call budget.
    #[serde(deserialize_with = "exact_or_none")]
    pub share: Option<f64>,
    /// Mean number of cycles to a false call of this part alone.
    #[serde(deserialize_with = "exact_or_none")]
    pub cycles_per_false_call: Option<f64>,
    /// The formula of its threshold.
    pub formula: Option<String>,
}

/// The watch at the moment of the look.
#[derive(Debug, Serialize, Deserialize, ToSchema)]
pub struct WatchApartBody {
    /// Standard deviation of a single value within its source, in the unit.
    #[serde(deserialize_with = "exact_or_none")]
    pub sigma: Option<f64>,
    /// Correlation of neighbours.
    #[serde(deserialize_with = "exact_or_none")]
    pub phi: Option<f64>,
    /// What of it was paid for.
    #[serde(deserialize_with = "exact_or_none")]
    pub phi_paid: Option<f64>,
    /// The margin in standard deviations, dependence paid.
    #[serde(deserialize_with = "exact_or_none")]
    pub margin_sd: Option<f64>,
    /// Mean number of cycles to a false call that the budget allows.
    #[serde(deserialize_with = "exact_or_none")]
    pub cycles_per_false_call: Option<f64>,
    /// Degrees of freedom of sigma; none when it counts as known.
    #[serde(deserialize_with = "exact_or_none")]
    pub df: Option<f64>,
    /// The part that called.
    pub called: Option<String>,
    /// The most likely start of what was called.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub since: Option<Time>,
    /// The earliest start that the values allow at 95 %.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub earliest: Option<Time>,
    /// The latest.
    #[schema(value_type = Option<String>, format = DateTime)]
    pub latest: Option<Time>,
    /// Its parts; empty while it learnt.
    pub parts: Vec<PartBody>,
}

/// The naming of the watch's call, on the values since its start.
#[derive(Debug, Serialize, Deserialize, ToSchema)]
pub struct CallApartBody {
    /// `level` or `spread`.
    pub aspect: String,
    /// Who was named.
    pub named: Vec<String>,
    /// The values since the start, taken apart as a span is.
    pub since: SpanBody,
}

/// A look and, where there was one, the call that was made with it, taken apart.
#[derive(Debug, Serialize, Deserialize, ToSchema)]
pub struct ExplanationBody {
    /// The bank.
    pub bank: String,
    /// When the look was taken.
    #[schema(value_type = String, format = DateTime)]
    pub at: Time,
    /// The notice that was raised with it.
    pub notice: Option<String>,
    /// Whether working everything out again from the values gives the same looks to the last bit; `null`
    /// where the values were not kept.
    pub agrees: Option<bool>,
    /// The unit of values and differences.
    pub unit: String,
    /// The budget as configured then.
    pub false_calls: Option<String>,
    /// The margin as configured then, in the unit.
    #[serde(deserialize_with = "exact_or_none")]
    pub margin: Option<f64>,
    /// Time between looks, in seconds.
    #[serde(deserialize_with = "exact_or_none")]
    pub look_every_s: Option<f64>,
    /// Whether the looks or the watch decided.
    pub decides: Option<String>,
    /// The look over each span, shortest first.
    pub spans: Vec<SpanBody>,
    /// The watch; `null` where sources share no cycle.
    pub watch: Option<WatchApartBody>,
    /// The naming of the watch's call; `null` where a look called or nothing was called.
    pub call: Option<CallApartBody>,
    /// What the line made.
    pub product: Option<String>,
    /// What was entered about the line before, oldest first.
    pub line_events: Vec<String>,
    /// The windows' values, with a header: source, cycle, taken, value, offset, counts.
    pub values_csv: Option<String>,
}

impl ExplanationBody {
    /// From evidence: everything is worked out again.
    pub fn of_evidence(evidence: &Evidence, notice: Option<&str>) -> Self {
        let again = evidence.examine();
        let worked = evidence.work_through(&again);
        let Premises {
            at,
            bank,
            watch,
            product,
            line_events,
            ..
        } = &evidence.premises;
        let span = |look: &std::sync::Arc<Look>| {
            let worked = worked.iter().find(|w| w.span == look.span);
            span_body(look, worked)
        };
        let called = evidence.premises.crossing.is_some();
        let decides = match watch {
            Some(said) if called || said.basis.is_some() => "watch",
            _ => "look",
        };
        let events = line_events.iter();
        Self {
            bank: bank.name.to_string(),
            at: *at,
            notice: notice.map(str::to_owned),
            agrees: Some(evidence.agrees_with(&again)),
            unit: bank.characteristic.unit.to_string(),
            false_calls: Some(bank.budget.to_string()),
            margin: Some(bank.margin),
            look_every_s: Some(bank.look_every_us as f64 / 1e6),
            decides: Some(decides.to_owned()),
            spans: evidence.looks.iter().map(span).collect(),
            watch: watch.as_ref().map(|w| watch_body(w, &evidence.premises)),
            call: call_body(evidence, &again),
            product: product.as_ref().map(ToString::to_string),
            line_events: events.map(line_event).collect(),
            values_csv: Some(csv(evidence)),
        }
    }

    /// From looks that were kept without their values.
    pub fn of_looks(bank: &str, unit: &str, looks: &[Look]) -> Option<Self> {
        let at = looks.iter().map(|l| l.at).max()?;
        let same_moment = looks.iter().filter(|l| l.at == at);
        Some(Self {
            bank: bank.to_owned(),
            at,
            notice: None,
            agrees: None,
            unit: unit.to_owned(),
            false_calls: None,
            margin: None,
            look_every_s: None,
            decides: None,
            spans: same_moment.map(|look| span_body(look, None)).collect(),
            watch: None,
            call: None,
            product: None,
            line_events: Vec::new(),
            values_csv: None,
        })
    }
}

fn call_body(evidence: &Evidence, again: &Examination) -> Option<CallApartBody> {
    let (call, worked) = evidence.work_through_since(again)?;
    let who = &evidence.premises.who;
    let name = |s: &SourceIx| {
        let one = who.iter().find(|p| p.source == *s)?;
        Some(one.name.to_string())
    };
    let look = evidence.looks.last()?;
    let mut since = span_body(look, Some(&worked));
    since.span = worked.span;
    since.finding = match call.aspect {
        Aspect::Level => word(Finding::LevelApart),
        Aspect::Spread => word(Finding::SpreadApart),
    };
    since.remark = String::new();
    Some(CallApartBody {
        aspect: match call.aspect {
            Aspect::Level => "level".to_owned(),
            Aspect::Spread => "spread".to_owned(),
        },
        named: call.named.iter().filter_map(name).collect(),
        since,
    })
}

/// A line event in one line.
fn line_event(event: &LineEvent) -> String {
    let source = event.change.source();
    let source = source.map_or_else(String::new, |s| format!(" of {s}"));
    format!(
        "{} {}{source}, entered by {}",
        event.at,
        event.change.words(),
        event.by
    )
}

fn span_body(look: &Look, worked: Option<&Worked>) -> SpanBody {
    let plain = || {
        look.tests.iter().map(|entry| WorkedTest {
            entry: entry.clone(),
            steps: Vec::new(),
        })
    };
    let tests: Vec<WorkedTestBody> = match worked {
        Some(worked) => worked.tests.iter().map(test_body).collect(),
        None => plain().map(|t| test_body(&t)).collect(),
    };
    let place = |worked: &Worked, (source, mean): &(Name, f64)| PlaceBody {
        source: source.to_string(),
        mean: finite(*mean),
        even: worked.even.contains(source),
    };
    SpanBody {
        span: look.span,
        finding: word(look.finding),
        remark: look.remark.clone(),
        alpha_level: look.alpha_level,
        alpha_spread: look.alpha_spread,
        tests,
        pairs: worked.map_or_else(Vec::new, |w| w.pairs.iter().map(pair_body).collect()),
        order: worked.map_or_else(Vec::new, |w| w.order.iter().map(|o| place(w, o)).collect()),
        naming_alpha: worked.map(|w| w.naming_alpha),
    }
}

fn test_body(test: &WorkedTest) -> WorkedTestBody {
    let steps = test.steps.iter().map(|s| StepBody {
        what: s.what.clone(),
        value: finite(s.value),
    });
    let mut steps: Vec<StepBody> = steps.collect();
    if steps.is_empty() {
        let entry = &test.entry;
        let own = [
            ("statistic", entry.statistic),
            ("p of the textbook", entry.p),
            ("p that decides", entry.p_paid),
        ];
        steps = own
            .map(|(what, value)| StepBody {
                what: what.to_owned(),
                value: finite(value),
            })
            .into();
    }
    let raw = if test.entry.raw { ", raw values" } else { "" };
    WorkedTestBody {
        test: test.entry.key(),
        name: format!("{}{raw}", test.entry.method.words()),
        decides: test.entry.decides,
        steps,
    }
}

fn pair_body(pair: &WorkedPair) -> WorkedPairBody {
    let WorkedPair {
        above,
        below,
        difference,
        std_error,
        df,
        margin,
        q,
        p,
        low,
    } = pair;
    WorkedPairBody {
        above: above.to_string(),
        below: below.to_string(),
        difference: finite(*difference),
        std_error: finite(*std_error),
        df: finite(*df),
        margin: *margin,
        q: finite(*q),
        p: finite(*p),
        low: finite(*low),
    }
}

fn watch_body(said: &WatchSaid, premises: &Premises) -> WatchApartBody {
    let named = |s: SourceIx| {
        let one = premises.who.iter().find(|p| p.source == s)?;
        Some(one.name.to_string())
    };
    let account = said.account();
    let entry = |part| {
        account
            .iter()
            .flat_map(|a| &a.parts)
            .find(|e| e.part == part)
    };
    let part = |r: &crate::verdict::watch::Reading| PartBody {
        part: r.part.key().to_owned(),
        statistic: finite(r.statistic),
        threshold: finite(r.threshold),
        source: r.leading.and_then(named),
        share: entry(r.part).map(|e| e.share),
        cycles_per_false_call: entry(r.part).map(|e| e.cycles_per_false_call),
        formula: entry(r.part).map(|e| e.formula.to_owned()),
    };
    let crossing = premises.crossing.as_ref();
    let basis = account.as_ref().map(|a| &a.basis);
    WatchApartBody {
        sigma: said.sigma.and_then(finite),
        phi: finite(said.phi.0),
        phi_paid: finite(said.phi.1),
        margin_sd: basis.and_then(|b| finite(b.margin_sd)),
        cycles_per_false_call: basis.and_then(|b| finite(b.cycles_per_false_call)),
        df: basis.and_then(|b| finite(b.df)),
        called: crossing.map(|c| c.part.key().to_owned()),
        since: crossing.map(|c| c.start.taken),
        earliest: crossing.map(|c| c.earliest.taken),
        latest: crossing.map(|c| c.latest.taken),
        parts: said.readings.iter().map(part).collect(),
    }
}

/// Every value of the windows; those that did not count (not closed yet, or from before a fresh start)
/// say so.
fn csv(evidence: &Evidence) -> String {
    let mut text = "source,cycle,taken,value,offset,counts\n".to_owned();
    let premises = &evidence.premises;
    let one = |window: &WindowView| {
        let place = premises.who.iter().position(|p| p.name == window.source);
        let from = place.and_then(|at| premises.fresh_from.get(at).copied());
        let paired = premises.bank.pairing.is_paired();
        (window.clone(), from, paired)
    };
    for (window, from, paired) in evidence.windows.iter().map(one) {
        let origin = window.origin.to_f64();
        let quoted = quoted(&window.source);
        for value in &window.values {
            let place = value.cycle.unwrap_or(value.taken.us());
            let closed = !paired || place <= premises.closed_to;
            let counts = closed && from.is_some_and(|from| place >= from);
            let cycle = value.cycle.map_or_else(String::new, |c| c.to_string());
            // Writing into a String cannot fail.
            let _ = writeln!(
                text,
                "{quoted},{cycle},{},{},{},{}",
                value.taken,
                origin + value.offset,
                value.offset,
                if counts { "yes" } else { "no" }
            );
        }
    }
    text
}

/// A name as RFC 4180 has it.
fn quoted(name: &str) -> String {
    if name.contains([',', '"', '\n', '\r']) {
        format!("\"{}\"", name.replace('"', "\"\""))
    } else {
        name.to_owned()
    }
}
