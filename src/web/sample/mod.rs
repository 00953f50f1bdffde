//! A plant made by hand, for tests of pages and metrics and for looking at them.
//!
//! Twelve banks, at least one per way of standing. Figures are made up but hang together: a source that a notice
//! names has moved in the looks too. The same seed gives the same plant.

mod looks;
mod notices;
mod past;
mod watch;

pub use looks::{WINDOW, values};
pub use past::SampleHistory;

use std::collections::BTreeMap;
use std::sync::Arc;

use crate::engine::{
    BankView, Condition, Cycles, OutletView, Plant, Raised, RefusalView, Snapshot, SourceState,
    SourceView,
};
use crate::model::{
    Bank, BankIx, Characteristic, Layout, LineChange, LineEvent, Offsets, Pairing, Reason, Refusal,
    SourceIx, Sources, Time, US_PER_DAY, US_PER_S, Value,
};
use crate::notice::{Kind, Notice};
use crate::verdict::{BudgetKept, Came, Estimate, Look, budget_kept};

use looks::look;
use notices::notice;

/// What is wrong with a sample bank.
#[derive(Clone, Copy, PartialEq)]
pub enum Story {
    /// Nothing.
    Even,
    /// The source at this place has moved by so much, for so many minutes.
    Level(usize, f64, i64),
    /// The source at this place scatters by this factor.
    Spread(usize, f64),
    /// The source at this place is silent.
    Silent(usize),
    /// So many values have arrived.
    Young(usize),
}

/// The moment of the sample: a time in the plant's summer.
pub fn moment() -> Time {
    Time::from_us(1_783_087_402_000_000)
}

/// A bank's setup.
pub fn bank(
    name: &str,
    equipment: &str,
    what: Characteristic,
    names: &[String],
    margin: f64,
) -> Bank {
    Bank {
        name: name.into(),
        equipment: Some(equipment.into()),
        characteristic: what,
        sources: Sources::Listed(names.iter().map(|n| n.as_str().into()).collect()),
        pairing: Pairing::Cycle,
        spans: vec![10, 40, 160, 640],
        look_every_us: 30 * US_PER_S,
        margin,
        spread_margin: 1.5,
        budget: "1 per 90 days".parse().expect("a budget"),
        wait_cycles: 3,
        silent_after_us: None,
        oldest_us: 30 * US_PER_DAY,
        layout: if equipment.starts_with("filler") {
            Layout::Ring
        } else {
            Layout::Row
        },
        groups: Vec::new(),
        cost_per_unit: None,
        reference: None,
        offsets: Offsets::None,
    }
}

fn content() -> Characteristic {
    Characteristic {
        name: "net content".into(),
        unit: "g".into(),
        resolution: Some(0.1),
        target: Some(Value::parse("503.0").expect("a value")),
        declared: Some(Value::parse("500.0").expect("a value")),
        lower: Some(485.0),
        upper: Some(515.0),
    }
}

fn diameter() -> Characteristic {
    Characteristic {
        name: "bore diameter".into(),
        unit: "mm".into(),
        resolution: Some(0.001),
        target: Some(Value::parse("12.000").expect("a value")),
        declared: None,
        lower: None,
        upper: None,
    }
}

/// Names "01" to `count`.
pub fn numbered(count: usize) -> Vec<String> {
    (1..=count).map(|n| format!("{n:02}")).collect()
}

/// A bank with its story, as of [`moment`].
pub fn view(bank: Bank, story: Story, seed: u64) -> BankView {
    let Sources::Listed(names) = &bank.sources else {
        panic!("sample banks list their sources");
    };
    let names = names.clone();
    let target = bank.characteristic.target.map_or(0.0, Value::to_f64);
    let values = match story {
        Story::Young(values) => values,
        _ => 640,
    };
    let spans = bank.spans.iter().filter(|s| **s <= values);
    let looks: Vec<Arc<Look>> = spans
        .map(|span| {
            Arc::new(look(
                &bank,
                &names,
                story,
                *span,
                moment().plus_us(-12 * US_PER_S),
                seed,
            ))
        })
        .collect();
    let open: Vec<Arc<Notice>> = notice(&bank, &names, story, &looks)
        .into_iter()
        .map(Arc::new)
        .collect();
    let now_look = looks
        .iter()
        .find(|l| l.span == 40)
        .or(looks.last())
        .cloned();
    let sources = names.iter().enumerate().map(|(at, name)| {
        let judged = now_look.as_ref().and_then(|l| l.sources.get(at));
        let followed = |kind: Kind| {
            let mut notices = open
                .iter()
                .filter(|n| n.kind == kind)
                .flat_map(|n| &n.sources);
            let known = notices.find(|s| s.source == *name)?;
            Some(Estimate {
                value: known.deviation,
                low: known.low,
                high: known.high,
            })
        };
        let named = open
            .iter()
            .filter(|n| n.sources.iter().any(|s| s.source == *name));
        let is_silent = story == Story::Silent(at);
        SourceView {
            source: SourceIx(u16::try_from(at).expect("small")),
            name: name.clone(),
            state: match (values, is_silent) {
                (_, true) => SourceState::Silent,
                (0, _) => SourceState::Awaited,
                _ => SourceState::Present,
            },
            values,
            last_value: (values > 0).then(|| target + bank.margin * (at as f64 * 1.7).sin()),
            last_taken: (values > 0)
                .then(|| moment().plus_us(if is_silent { -340 } else { -1 } * US_PER_S)),
            last_received: (values > 0)
                .then(|| moment().plus_us(if is_silent { -340 } else { -1 } * US_PER_S)),
            deviation: followed(Kind::LevelApart).or(judged.and_then(|s| s.deviation)),
            deviation_sigmas: judged.and_then(|s| Some(s.deviation?.value / 1.2)),
            sd_ratio: followed(Kind::SpreadApart).or(judged.and_then(|s| s.sd_ratio)),
            named: named.map(|n| n.kind).collect(),
            lag_us: (values > 0).then_some(240_000),
        }
    });
    let mut outcomes = BTreeMap::new();
    if values > 0 {
        outcomes.extend([
            ("accepted", 482_113),
            ("late", 12),
            ("double", 3),
            ("not_a_number", 2),
        ]);
    }
    BankView {
        sources: sources.collect(),
        raised: open.iter().map(|n| (n.kind, 1)).collect(),
        outcomes,
        stopped: None,
        product: None,
        line_events: line_events(story),
        watch: Some(watch::watch(&bank, names.len(), story, values)),
        refusals: if seed % 5 == 1 {
            refusals()
        } else {
            Vec::new()
        },
        cycles: Some(Cycles {
            closed: 40_176,
            skipped: 2,
            open: 1,
        }),
        interval_us: (values > 0).then_some(720_000),
        next_look: (values > 0).then(|| moment().plus_us(18 * US_PER_S)),
        newest_taken: (values > 0).then(|| moment().plus_us(-US_PER_S)),
        mean: now_look.is_some().then_some(target + 0.027 * bank.margin),
        kept: kept(&bank, values),
        raised_at: raised_at(&open),
        shown_span: now_look.map(|l| l.span),
        open,
        looks,
        bank: Arc::new(bank),
    }
}

/// Forty days with two calls, one of them for nothing.
fn kept(bank: &Bank, values: usize) -> Option<BudgetKept> {
    let came = Came {
        calls: 2,
        told: 2,
        nothing_found: 1,
    };
    let began = moment().plus_us(-40 * 86_400 * US_PER_S);
    let kept = budget_kept(bank.budget, came, began, moment());
    kept.filter(|_| values > 0)
}

fn raised_at(open: &[Arc<Notice>]) -> Vec<Raised> {
    let raised = open.iter().map(|n| Raised {
        at: n.raised,
        kind: n.kind,
    });
    raised.collect()
}

fn refusals() -> Vec<RefusalView> {
    let one = |reason, count, detail: &str, excerpt: &str| RefusalView {
        reason,
        count,
        last: Refusal {
            bank: Some(BankIx(0)),
            reason,
            topic: "quayside/filler2/head/07/net".into(),
            detail: detail.to_owned(),
            excerpt: excerpt.to_owned(),
        },
        at: moment().plus_us(-95 * US_PER_S),
    };
    vec![
        one(
            Reason::NotANumber,
            2,
            "the value at /v is text, not a number",
            "{\"v\":\"<b>503.1</b>\"}",
        ),
        one(
            Reason::Double,
            3,
            "cycle 40161 of source 07 was there already",
            "{\"v\":503.1,\"n\":40161}",
        ),
    ]
}

/// The whole plant.
pub fn snapshot() -> Snapshot {
    let banks = vec![
        view(
            bank("filler-2", "filler 2", content(), &numbered(12), 0.8),
            Story::Level(6, -1.62, 14),
            1,
        ),
        view(
            bank("filler-3", "filler 3", content(), &numbered(60), 0.8),
            Story::Even,
            2,
        ),
        view(
            bank(
                "mould-b bore",
                "mould b",
                diameter(),
                &named("cavity", 24),
                0.02,
            ),
            Story::Spread(10, 2.9),
            3,
        ),
        view(
            bank("spindles", "lathe 4", diameter(), &numbered(6), 0.02),
            Story::Silent(4),
            4,
        ),
        view(
            bank("caps", "capper 1", content(), &numbered(16), 0.8),
            Story::Young(6),
            5,
        ),
        view(
            bank("filler-4", "filler 4", content(), &numbered(120), 0.8),
            Story::Level(77, 2.1, 50),
            6,
        ),
        view(
            bank("sealer", "line 9", content(), &numbered(8), 0.8),
            Story::Young(0),
            7,
        ),
        view(
            bank("filler-5", "filler 5", content(), &numbered(24), 0.8),
            Story::Even,
            8,
        ),
        view(
            bank("labels", "labeller 1", diameter(), &numbered(8), 0.02),
            Story::Even,
            9,
        ),
        view(
            bank("weigher", "line 9", content(), &numbered(14), 0.8),
            Story::Spread(3, 2.2),
            10,
        ),
        view(
            bank("mould-c", "mould c", diameter(), &named("cavity", 8), 0.02),
            Story::Even,
            11,
        ),
        view(
            bank("scales", "packing", content(), &numbered(4), 0.8),
            Story::Level(1, 1.9, 200),
            12,
        ),
    ];
    Snapshot {
        version: 1,
        plant: Arc::new(Plant {
            name: "Quayside".into(),
            zone: jiff::tz::TimeZone::get("Europe/Lisbon").expect("bundled"),
            pages: "http://127.0.0.1:7310".to_owned(),
            routes: Vec::new(),
            manners: crate::notice::Manners::default(),
        }),
        broker: Condition::Well,
        store: Condition::Well,
        banks: banks.into_iter().map(Arc::new).collect(),
        refusals: vec![RefusalView {
            reason: Reason::NoBank,
            ..refusals().remove(0)
        }],
        outlets: vec![OutletView::new("mqtt".into())],
    }
}

fn named(word: &str, count: usize) -> Vec<String> {
    (1..=count).map(|n| format!("{word} {n}")).collect()
}

/// What people entered: a source that moved was adjusted before.
fn line_events(story: Story) -> Vec<LineEvent> {
    let Story::Level(at, ..) = story else {
        return Vec::new();
    };
    vec![LineEvent {
        at: moment().plus_us(-5400 * US_PER_S),
        by: "R. Matos".into(),
        change: LineChange::Adjustment {
            source: format!("{:02}", at + 1).into(),
            by: Some(0.4),
        },
        reason: "valve seat cleaned".to_owned(),
    }]
}
