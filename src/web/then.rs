//! A bank as it was seen at a past moment, from what was kept.
//!
//! What must hold: nothing is shown that was not kept; values, counts and refusals of then are absent,
//! not zero.

use std::collections::BTreeMap;
use std::sync::Arc;

use crate::engine::{BankView, SourceState, SourceView, shown_look};
use crate::notice::{Kind, Notice};
use crate::verdict::Look;

/// The bank then: `looks` are the newest kept whole before it, `notices` stood then.
pub fn view(now: &BankView, looks: Vec<Look>, notices: Vec<Notice>) -> BankView {
    let looks: Vec<Arc<Look>> = looks.into_iter().map(Arc::new).collect();
    let shown = shown_look(&looks, now.bank.margin);
    let sources = now.sources.iter().map(|s| source(s, shown, &notices));
    let mean = shown.map(|l| l.sources.iter().map(|s| s.mean));
    let mean = mean.map(|means| means.clone().sum::<f64>() / means.count().max(1) as f64);
    BankView {
        bank: now.bank.clone(),
        sources: sources.collect(),
        shown_span: shown.map(|l| l.span),
        mean: mean.filter(|m| m.is_finite()),
        looks,
        open: notices.into_iter().map(Arc::new).collect(),
        raised: BTreeMap::new(),
        outcomes: BTreeMap::new(),
        refusals: Vec::new(),
        cycles: None,
        stopped: None,
        product: None,
        line_events: Vec::new(),
        watch: None,
        interval_us: None,
        next_look: None,
        newest_taken: None,
        kept: None,
        raised_at: Vec::new(),
        shifts: None,
    }
}

fn source(now: &SourceView, shown: Option<&Look>, notices: &[Notice]) -> SourceView {
    let seen = shown.and_then(|l| l.sources.iter().find(|s| s.name == now.name));
    let sigma = shown.map_or(0.0, |l| l.sigma);
    let deviation = seen.and_then(|s| s.deviation);
    let named: Vec<Kind> = notices
        .iter()
        .filter(|n| n.sources.iter().any(|s| s.source == now.name))
        .map(|n| n.kind)
        .collect();
    SourceView {
        source: now.source,
        name: now.name.clone(),
        state: SourceState::Present,
        values: 0,
        last_value: None,
        last_taken: None,
        last_received: None,
        deviation,
        deviation_sigmas: deviation.filter(|_| sigma > 0.0).map(|d| d.value / sigma),
        sd_ratio: seen.and_then(|s| s.sd_ratio),
        named,
        lag_us: None,
    }
}
