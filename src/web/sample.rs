//! A plant made by hand, for tests of pages and metrics and for looking at them.
//!
//! Seven banks, one per way of standing. Figures are made up but hang together: a source that a notice
//! names has moved in the looks too. The same seed gives the same plant.

use std::collections::BTreeMap;
use std::sync::Arc;

use fastrand::Rng;

use crate::engine::{
    BankView, Condition, Cycles, History, HistoryError, Page, Plant, RefusalView, Snapshot,
    SourceState, SourceView,
};
use crate::model::{
    Bank, BankIx, Characteristic, Layout, Name, Pairing, Reason, Refusal, SourceIx, Sources, Time,
    US_PER_DAY, US_PER_S, Value,
};
use crate::notice::{Acknowledgement, Kind, NamedSource, Notice, Priority, Since, State};
use crate::verdict::{Dependence, Digest, Estimate, Finding, Look, Method, SourceLook, TestEntry};

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
pub fn now() -> Time {
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
        layout: Layout::Row,
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

/// Around zero, bell-shaped enough, with unit standard deviation.
fn noise(rng: &mut Rng) -> f64 {
    let sum: f64 = (0..12).map(|_| rng.f64()).sum();
    sum - 6.0
}

/// A bank with its story, as of [`now`].
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
                now().plus_us(-12 * US_PER_S),
                seed,
            ))
        })
        .collect();
    let open: Vec<Arc<Notice>> = notice(&bank, &names, story, &looks)
        .into_iter()
        .map(Arc::new)
        .collect();
    let longest = looks.last().cloned();
    let sources = names.iter().enumerate().map(|(at, name)| {
        let judged = longest.as_ref().and_then(|l| l.sources.get(at));
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
                .then(|| now().plus_us(if is_silent { -340 } else { -1 } * US_PER_S)),
            last_received: (values > 0)
                .then(|| now().plus_us(if is_silent { -340 } else { -1 } * US_PER_S)),
            deviation: judged.and_then(|s| s.deviation),
            deviation_sigmas: judged.and_then(|s| Some(s.deviation?.value / 1.2)),
            sd_ratio: judged.and_then(|s| s.sd_ratio),
            named: named.map(|n| n.kind).collect(),
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
        open,
        outcomes,
        refusals: if values > 0 { refusals() } else { Vec::new() },
        cycles: Some(Cycles {
            closed: 40_176,
            skipped: 2,
            open: 1,
        }),
        interval_us: (values > 0).then_some(720_000),
        next_look: (values > 0).then(|| now().plus_us(18 * US_PER_S)),
        newest_taken: (values > 0).then(|| now().plus_us(-US_PER_S)),
        mean: longest.is_some().then_some(target + 0.027 * bank.margin),
        looks,
        bank: Arc::new(bank),
    }
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
        at: now().plus_us(-95 * US_PER_S),
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

/// A look with figures that fit the story.
pub fn look(bank: &Bank, names: &[Name], story: Story, span: usize, at: Time, seed: u64) -> Look {
    let mut rng = Rng::with_seed(seed ^ span as u64 ^ at.us() as u64);
    let scale = if bank.margin > 0.0 { bank.margin } else { 1.0 };
    let half = scale * 3.2 / (span as f64).sqrt();
    let share = match story {
        Story::Level(_, _, minutes) => {
            let since = now().plus_us(-minutes * 60 * US_PER_S);
            (at.us_since(since) as f64 / (span as f64 * 720_000.0)).clamp(0.0, 1.0)
        }
        _ => 1.0,
    };
    let judged = names.iter().enumerate().map(|(i, name)| {
        let moved = match story {
            Story::Level(which, by, _) if which == i => by * share,
            _ => 0.0,
        };
        let deviation = moved + noise(&mut rng) * half / 3.5;
        let wide = match story {
            Story::Spread(which, by) if which == i => by,
            _ => 1.0,
        };
        let ratio = wide * (noise(&mut rng) * 0.5 / (span as f64).sqrt()).exp();
        let factor = (2.3 / (span as f64).sqrt()).exp();
        SourceLook {
            source: SourceIx(u16::try_from(i).expect("small")),
            name: name.clone(),
            n: span,
            mean: bank.characteristic.target.map_or(0.0, Value::to_f64) + deviation,
            sd: scale * 1.5 * ratio,
            deviation: Some(Estimate {
                value: deviation,
                low: deviation - half,
                high: deviation + half,
            }),
            sd_ratio: Some(Estimate {
                value: ratio,
                low: ratio / factor,
                high: ratio * factor,
            }),
            named_level: moved.abs() - half > scale,
            named_spread: wide / factor > bank.spread_margin,
        }
    });
    let sources: Vec<SourceLook> = judged.collect();
    let level = sources.iter().any(|s| s.named_level);
    let spread = sources.iter().any(|s| s.named_spread);
    let finding = match (level, spread) {
        (true, _) => Finding::LevelApart,
        (_, true) => Finding::SpreadApart,
        _ => Finding::Even,
    };
    let level_p = if level {
        3.1e-14
    } else {
        0.02 + 0.9 * rng.f64()
    };
    let spread_p = if spread {
        4.4e-11
    } else {
        0.02 + 0.9 * rng.f64()
    };
    Look {
        bank: bank.name.clone(),
        at,
        span,
        finding,
        remark: String::new(),
        alpha_level: 7.7e-7,
        alpha_spread: 1.9e-7,
        tests: tests(names.len(), span, level_p, spread_p),
        dependence: Some(Dependence {
            phi: 0.04,
            std_error: 0.012,
            variance_factor: 1.083,
        }),
        sigma: scale * 1.5,
        sources,
    }
}

fn tests(k: usize, n: usize, level_p: f64, spread_p: f64) -> Vec<TestEntry> {
    let (k, n) = (k as f64, n as f64);
    let entry = |method, raw, statistic, p, decides| TestEntry {
        method,
        raw,
        statistic,
        df: match method {
            Method::Bartlett => vec![k - 1.0],
            Method::BlockedAnova => vec![k - 1.0, (k - 1.0) * (n - 1.0)],
            _ => vec![k - 1.0, k * (n - 1.0)],
        },
        p,
        decides,
    };
    vec![
        entry(Method::BrownForsythe, false, 1.7059, 0.0881, false),
        entry(Method::BrownForsytheStepFree, false, 1.52, spread_p, true),
        entry(Method::Bartlett, false, 20.7859, 0.0136, false),
        entry(Method::Anova, true, 2.2969, 0.022_661, false),
        entry(Method::Welch, true, 2.0558, 0.0538, false),
        entry(Method::BlockedAnova, false, 14.21, level_p, true),
    ]
}

/// The notice of a story.
fn notice(bank: &Bank, names: &[Name], story: Story, looks: &[Arc<Look>]) -> Option<Notice> {
    let (kind, at, figure, half, minutes) = match story {
        Story::Level(at, by, minutes) => (Kind::LevelApart, at, by, 0.24 * by.abs(), minutes),
        Story::Spread(at, by) => (Kind::SpreadApart, at, by, 0.4, 12),
        _ => return None,
    };
    let finding = if kind == Kind::LevelApart {
        Finding::LevelApart
    } else {
        Finding::SpreadApart
    };
    let span = looks
        .iter()
        .find(|l| l.finding == finding)
        .map_or(40, |l| l.span);
    let name = names.get(at)?;
    let since = now().plus_us(-minutes * 60 * US_PER_S);
    let unit = bank.characteristic.unit.clone();
    let (word, than, todo) = if figure < 0.0 {
        ("low", "less", "Raise")
    } else {
        ("high", "more", "Lower")
    };
    let (subject, text, advice) = if kind == Kind::LevelApart {
        (
            format!("{}: {name} {word} by {:.2} {unit}", bank.name, figure.abs()),
            format!(
                "Source {name} of {} gives {:.2} {unit} {than} than the other sources. The margin is {} {unit}. \
                 The bank’s mean is 503.03 {unit}, target 503.0 {unit}, declared 500.0 {unit}.",
                bank.name,
                figure.abs(),
                bank.margin
            ),
            format!(
                "{todo} {name} by about {:.2} {unit}, then watch whether it comes back.",
                figure.abs()
            ),
        )
    } else {
        (
            format!("{}: {name} scatters {figure:.1} times as much", bank.name),
            format!(
                "The values of source {name} scatter {figure:.1} times as much as those of the others. Its mean has not moved."
            ),
            format!("Check {name} for play, dirt or a loose sensor before adjusting its level."),
        )
    };
    Some(Notice {
        id: format!("{}-2026-0007", bank.name.replace(' ', "-")).into(),
        plant: "Quayside".into(),
        bank: bank.name.clone(),
        kind,
        state: State::Unacknowledged,
        priority: Priority::Medium,
        sources: vec![NamedSource {
            source: name.clone(),
            deviation: figure,
            low: figure - half,
            high: figure + half,
        }],
        unit,
        since: Since {
            at: since,
            earliest: since.plus_us(-70 * US_PER_S),
            latest: since.plus_us(40 * US_PER_S),
        },
        raised: since.plus_us(65 * US_PER_S),
        changed: since.plus_us(65 * US_PER_S),
        returned: None,
        acknowledged: None,
        subject,
        text,
        advice,
        url: format!("http://127.0.0.1:7310/banks/{}", bank.name),
        span,
    })
}

/// Past notices of the first bank, newest first.
pub fn past_notices(view: &BankView) -> Vec<Notice> {
    let template = view.open.first().expect("the first bank has a notice");
    let past = |number: u32, hours: i64, source: &str, by: f64| {
        let start = now().plus_us(-hours * 3600 * US_PER_S);
        Notice {
            id: format!("{}-2026-{number:04}", view.bank.name).into(),
            state: State::Normal,
            sources: vec![NamedSource {
                source: source.into(),
                deviation: by,
                low: by - 0.3,
                high: by + 0.3,
            }],
            since: Since {
                at: start,
                earliest: start,
                latest: start,
            },
            raised: start.plus_us(90 * US_PER_S),
            changed: start.plus_us(2400 * US_PER_S),
            returned: Some(start.plus_us(2400 * US_PER_S)),
            acknowledged: Some(Acknowledgement {
                by: "R. Almeida".into(),
                at: start.plus_us(300 * US_PER_S),
                comment: "valve cleaned".into(),
            }),
            subject: format!("{}: {source} high by {by:.2} g", view.bank.name),
            ..Notice::clone(template)
        }
    };
    vec![past(6, 3, "03", 1.31), past(5, 26, "11", 1.12)]
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
    ];
    Snapshot {
        version: 1,
        plant: Arc::new(Plant {
            name: "Quayside".into(),
            zone: jiff::tz::TimeZone::get("Europe/Lisbon").expect("bundled"),
            pages: "http://127.0.0.1:7310".to_owned(),
        }),
        broker: Condition::Well,
        store: Condition::Well,
        banks: banks.into_iter().map(Arc::new).collect(),
        refusals: vec![RefusalView {
            reason: Reason::NoBank,
            ..refusals().remove(0)
        }],
        outbox: 0,
        outbox_trouble: None,
    }
}

fn named(word: &str, count: usize) -> Vec<String> {
    (1..=count).map(|n| format!("{word} {n}")).collect()
}

/// The past of the sample: looks of the last six hours, and two notices of the first bank.
pub struct SampleHistory {
    snapshot: Snapshot,
}

impl SampleHistory {
    /// Of this plant.
    pub fn new(snapshot: Snapshot) -> Self {
        Self { snapshot }
    }

    fn stories(&self) -> Vec<(Arc<BankView>, Story)> {
        let stories = [
            Story::Level(6, -1.62, 14),
            Story::Even,
            Story::Spread(10, 2.9),
            Story::Silent(4),
            Story::Young(6),
            Story::Level(77, 2.1, 50),
            Story::Young(0),
        ];
        self.snapshot.banks.iter().cloned().zip(stories).collect()
    }
}

impl History for SampleHistory {
    fn digests(
        &self,
        bank: &str,
        from: Time,
        to: Time,
        most: usize,
    ) -> Result<Vec<Digest>, HistoryError> {
        let stories = self.stories();
        let Some((view, story)) = stories.into_iter().find(|(v, _)| &*v.bank.name == bank) else {
            return Ok(Vec::new());
        };
        if matches!(story, Story::Young(_)) {
            return Ok(Vec::new());
        }
        let names: Vec<Name> = view.sources.iter().map(|s| s.name.clone()).collect();
        let mut all = Vec::new();
        let start = now().plus_us(-6 * 3600 * US_PER_S);
        for step in 0..(6 * 120) {
            let at = start.plus_us(step * 30 * US_PER_S + 18 * US_PER_S);
            // The line stood still for a while.
            if (300..330).contains(&step) || at < from || at >= to {
                continue;
            }
            for span in &view.bank.spans {
                all.push(look(&view.bank, &names, story, *span, at, 9).digest());
            }
        }
        let skip = all.len().saturating_sub(most);
        Ok(all.split_off(skip))
    }

    fn looks_at(&self, _bank: &str, _at: Time) -> Result<Vec<Look>, HistoryError> {
        Ok(Vec::new())
    }

    fn notices(&self, after: Option<&str>, most: usize) -> Result<Page<Notice>, HistoryError> {
        let open = self
            .snapshot
            .banks
            .iter()
            .flat_map(|b| &b.open)
            .map(|n| Notice::clone(n));
        let past = self
            .snapshot
            .banks
            .first()
            .map_or_else(Vec::new, |b| past_notices(b));
        let all: Vec<Notice> = open.chain(past).collect();
        let start = match after {
            None => 0,
            Some(id) => {
                all.iter()
                    .position(|n| &*n.id == id)
                    .ok_or(HistoryError("no such place".to_owned()))?
                    + 1
            }
        };
        let items: Vec<Notice> = all.iter().skip(start).take(most).cloned().collect();
        let is_end = start + items.len() >= all.len();
        let next = items.last().filter(|_| !is_end).map(|n| n.id.to_string());
        Ok(Page { items, next })
    }

    fn notice(&self, id: &str) -> Result<Option<Notice>, HistoryError> {
        Ok(self
            .notices(None, usize::MAX)?
            .items
            .into_iter()
            .find(|n| &*n.id == id))
    }
}
