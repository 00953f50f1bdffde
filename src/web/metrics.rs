//! `/metrics`: Prometheus text format 0.0.4, a function of the snapshot and the durations.
//!
//! What must hold: names, labels and meanings stay (dashboards last); base units; no series of a bank
//! or source that is gone, because every answer is made anew. Deliberately absent: p as a thing to
//! alert on. A p-value below some line happens every few hours in an even bank; the call budget is
//! kept by the engine, and `evenrow_notice_active` is its word.

mod notices;

use axum::extract::State;
use axum::http::header;
use axum::response::{IntoResponse, Response};
use prometheus::{GaugeVec, IntCounterVec, IntGauge, IntGaugeVec, Opts, Registry, TextEncoder};

use crate::engine::{BankView, Condition, Snapshot, SourceState};
use crate::model::Time;
use crate::notice::Kind;
use crate::verdict::{Look, Method, TestEntry};

use super::durations::Durations;
use super::problem::Problem;
use super::site::App;

/// Why the metrics cannot be written.
#[derive(Debug, thiserror::Error)]
#[error("the metrics cannot be written: {0}")]
pub struct MetricsError(#[from] prometheus::Error);

/// Kinds whose series are always there: they name sources at every look.
const LOOKED_FOR: [Kind; 2] = [Kind::LevelApart, Kind::SpreadApart];

/// Gives the metrics.
pub async fn answer(State(app): State<App>) -> Response {
    match text(&app.now(), &app.site.durations, app.site.clock.now()) {
        Ok(text) => {
            let kind = [(
                header::CONTENT_TYPE,
                "text/plain; version=0.0.4; charset=utf-8",
            )];
            (kind, text).into_response()
        }
        Err(error) => {
            tracing::error!(%error, "metrics failed");
            Problem::internal(&error.to_string()).into_response()
        }
    }
}

/// The metrics as text.
///
/// # Errors
/// When the library refuses a name or cannot encode.
pub fn text(snapshot: &Snapshot, durations: &Durations, now: Time) -> Result<String, MetricsError> {
    let families = Families::new()?;
    families.fill_plant(snapshot);
    for view in &snapshot.banks {
        families.fill_bank(view);
    }
    notices::fill(&families.registry, snapshot, now)?;
    for histogram in durations.histograms() {
        families.registry.register(Box::new(histogram))?;
    }
    Ok(TextEncoder::new().encode_to_string(&families.registry.gather())?)
}

struct Families {
    registry: Registry,
    measurements: IntCounterVec,
    window_values: IntGaugeVec,
    sources: IntGaugeVec,
    deviation: GaugeVec,
    named: IntGaugeVec,
    last: GaugeVec,
    p: GaugeVec,
    f: GaugeVec,
    alpha: GaugeVec,
    watch: GaugeVec,
    active: IntGaugeVec,
    notices: IntCounterVec,
    broker: IntGauge,
    store: IntGauge,
    outbox: IntGaugeVec,
    deliveries: IntCounterVec,
    build: IntGaugeVec,
}

impl Families {
    fn new() -> Result<Self, MetricsError> {
        let registry = Registry::new();
        let r = &registry;
        Ok(Self {
            measurements: counters(
                r,
                "evenrow_measurements_total",
                MEASUREMENTS,
                &["bank", "outcome"],
            )?,
            window_values: gauges(
                r,
                "evenrow_window_values",
                WINDOW_VALUES,
                &["bank", "source"],
            )?,
            sources: gauges(r, "evenrow_sources", SOURCES, &["bank", "state"])?,
            deviation: figures(
                r,
                "evenrow_source_deviation_sigmas",
                DEVIATION,
                &["bank", "source"],
            )?,
            named: gauges(
                r,
                "evenrow_source_named",
                NAMED,
                &["bank", "source", "kind"],
            )?,
            last: figures(
                r,
                "evenrow_source_last_measurement_timestamp_seconds",
                LAST,
                &["bank", "source"],
            )?,
            p: figures(r, "evenrow_look_p", LOOK_P, &["bank", "kind", "span"])?,
            f: figures(r, "evenrow_look_f", LOOK_F, &["bank", "kind", "span"])?,
            alpha: figures(
                r,
                "evenrow_look_alpha",
                LOOK_ALPHA,
                &["bank", "kind", "span"],
            )?,
            watch: figures(r, "evenrow_watch_ratio", WATCH_RATIO, &["bank", "part"])?,
            active: gauges(r, "evenrow_notice_active", ACTIVE, &["bank", "kind"])?,
            notices: counters(r, "evenrow_notices_total", NOTICES, &["bank", "kind"])?,
            broker: gauge(r, "evenrow_broker_connected", BROKER)?,
            store: gauge(r, "evenrow_store_writable", STORE)?,
            outbox: gauges(r, "evenrow_outbox_deliveries", OUTBOX, &["outlet"])?,
            deliveries: counters(
                r,
                "evenrow_deliveries_total",
                DELIVERIES,
                &["outlet", "outcome"],
            )?,
            build: gauges(r, "evenrow_build_info", BUILD, &["version"])?,
            registry,
        })
    }

    fn fill_plant(&self, snapshot: &Snapshot) {
        let well = |condition: &Condition| {
            i64::from(matches!(condition, Condition::Well | Condition::Noted(_)))
        };
        self.broker.set(well(&snapshot.broker));
        self.store.set(well(&snapshot.store));
        for outlet in &snapshot.outlets {
            let name = &*outlet.name;
            self.outbox
                .with_label_values(&[name])
                .set(whole(outlet.waiting));
            for (outcome, count) in [("delivered", outlet.delivered), ("failed", outlet.failed)] {
                self.deliveries
                    .with_label_values(&[name, outcome])
                    .inc_by(count);
            }
        }
        self.build
            .with_label_values(&[env!("CARGO_PKG_VERSION")])
            .set(1);
        for refusal in &snapshot.refusals {
            let labels = ["", refusal.reason.word()];
            self.measurements
                .with_label_values(&labels)
                .inc_by(refusal.count);
        }
    }

    fn fill_bank(&self, view: &BankView) {
        let bank = &*view.bank.name;
        for (outcome, count) in &view.outcomes {
            self.measurements
                .with_label_values(&[bank, outcome])
                .inc_by(*count);
        }
        for state in [
            SourceState::Awaited,
            SourceState::New,
            SourceState::Present,
            SourceState::Silent,
        ] {
            let count = view.sources.iter().filter(|s| s.state == state).count();
            self.sources
                .with_label_values(&[bank, state.word()])
                .set(whole(count));
        }
        for kind in Kind::ALL {
            let labels = [bank, kind.word()];
            let open = view.open.iter();
            let active = open
                .filter(|n| n.kind == kind && n.state.is_active())
                .count();
            self.active.with_label_values(&labels).set(whole(active));
            let raised = view.raised.get(&kind).copied().unwrap_or(0);
            self.notices.with_label_values(&labels).inc_by(raised);
        }
        self.fill_sources(view);
        for look in &view.looks {
            self.fill_look(bank, look);
        }
        for reading in view.watch.iter().flat_map(|w| &w.readings) {
            let labels = [bank, reading.part.key()];
            self.watch.with_label_values(&labels).set(reading.ratio);
        }
    }

    fn fill_sources(&self, view: &BankView) {
        let bank = &*view.bank.name;
        for source in &view.sources {
            let labels = [bank, &*source.name];
            self.window_values
                .with_label_values(&labels)
                .set(whole(source.values));
            if let Some(sigmas) = source.deviation_sigmas.filter(|s| s.is_finite()) {
                self.deviation.with_label_values(&labels).set(sigmas);
            }
            if let Some(taken) = source.last_taken {
                self.last.with_label_values(&labels).set(taken.as_seconds());
            }
            for kind in LOOKED_FOR.iter().chain(&source.named) {
                let named = i64::from(source.named.contains(kind));
                self.named
                    .with_label_values(&[bank, &*source.name, kind.word()])
                    .set(named);
            }
        }
    }

    fn fill_look(&self, bank: &str, look: &Look) {
        let span = look.span.to_string();
        for (kind, test, alpha) in [
            ("level", look.level_test(), look.alpha_level),
            ("spread", look.spread_test(), look.alpha_spread),
        ] {
            let labels = [bank, kind, &span];
            self.alpha.with_label_values(&labels).set(alpha);
            if let Some(p) = test.map(|t| t.p_paid).filter(|p| p.is_finite()) {
                self.p.with_label_values(&labels).set(p);
            }
            if let Some(f) = test.and_then(|t| f_of(look, t)).filter(|f| f.is_finite()) {
                self.f.with_label_values(&labels).set(f);
            }
        }
    }
}

/// The F statistic beside a deciding test: its own, or Welch's where pairs decide.
fn f_of(look: &Look, deciding: &TestEntry) -> Option<f64> {
    if deciding.method != Method::PairsBeyondMargin {
        return Some(deciding.statistic);
    }
    let mut tests = look.tests.iter();
    tests
        .find(|t| t.method == Method::Welch && !t.raw)
        .map(|t| t.statistic)
}

fn whole(count: usize) -> i64 {
    i64::try_from(count).unwrap_or(i64::MAX)
}

fn counters(
    r: &Registry,
    name: &str,
    help: &str,
    labels: &[&str],
) -> Result<IntCounterVec, MetricsError> {
    let made = IntCounterVec::new(Opts::new(name, help), labels)?;
    r.register(Box::new(made.clone()))?;
    Ok(made)
}

fn gauges(
    r: &Registry,
    name: &str,
    help: &str,
    labels: &[&str],
) -> Result<IntGaugeVec, MetricsError> {
    let made = IntGaugeVec::new(Opts::new(name, help), labels)?;
    r.register(Box::new(made.clone()))?;
    Ok(made)
}

fn figures(
    r: &Registry,
    name: &str,
    help: &str,
    labels: &[&str],
) -> Result<GaugeVec, MetricsError> {
    let made = GaugeVec::new(Opts::new(name, help), labels)?;
    r.register(Box::new(made.clone()))?;
    Ok(made)
}

fn gauge(r: &Registry, name: &str, help: &str) -> Result<IntGauge, MetricsError> {
    let made = IntGauge::new(name, help)?;
    r.register(Box::new(made.clone()))?;
    Ok(made)
}

const MEASUREMENTS: &str = "Measurements since the process started by outcome: accepted, late, or \
    the reason of refusal. Without a bank: topics that match none.";
const WINDOW_VALUES: &str = "Values in a source's window now.";
const SOURCES: &str = "Sources of a bank by state: awaited, new, present, silent.";
const DEVIATION: &str = "Deviation of a source from the even set without it, in standard deviations \
    within sources: since it left where an open notice names it, else over the shortest span that \
    resolves the margin. Shows size; it is not corrected for \
    how often one looks, so do not alert on it.";
const NAMED: &str = "1 while an open notice of this kind names the source, else 0. Join it with \
    evenrow_notice_active on (bank, kind): the names of one notice share one family-wise error rate.";
const LAST: &str = "Time of the newest measurement of a source, as taken.";
const LOOK_P: &str = "p of the test that decides on this kind at the newest look over this span, \
    dependence between successive values paid for. \
    Never alert on it: the same data is looked at again and again, so small values come by chance \
    every few hours. evenrow_notice_active spends the call budget over all looks.";
const LOOK_F: &str = "F of the test that decides on this kind at the newest look over this span; \
    Welch's where pairs beyond the margin decide.";
const LOOK_ALPHA: &str =
    "The share of the call budget that one look over this span spends on this kind.";
const WATCH_RATIO: &str = "Statistic of a part of the watch over its threshold: few (single sources), \
    split (groups), pair (two sources apart), erratic, quiet. Above 1 the watch calls. It begins anew after \
    a call; evenrow_notice_active is what to alert on.";
const ACTIVE: &str = "Notices of this kind whose condition holds now. Alert on this and join \
    evenrow_source_named for the names: it is the only series that keeps the bank's call budget. \
    p-values and deviations do not.";
const NOTICES: &str = "Notices raised since the process started.";
const BROKER: &str = "1 while the broker is connected and every subscription confirmed, else 0.";
const STORE: &str = "1 while the store is recovered and takes commits, else 0.";
const OUTBOX: &str =
    "Deliveries of notices that an outlet has not confirmed yet; mqtt is the broker.";
const DELIVERIES: &str = "Deliveries of notices since the process started: delivered, or failed for \
    a reason that was told. What failed is kept and sent again, so it may be counted more than once.";
const BUILD: &str = "Always 1; the version stands in the label.";
