//! Looks whose figures fit a story.

use fastrand::Rng;

use crate::engine::WindowValue;
use crate::model::{Bank, Name, SourceIx, Time, US_PER_S, Value};
use crate::verdict::{Dependence, Estimate, Finding, Look, Method, SourceLook, TestEntry};

use super::{Story, moment};

/// Around zero, bell-shaped enough, with unit standard deviation.
fn noise(rng: &mut Rng) -> f64 {
    let sum: f64 = (0..12).map(|_| rng.f64()).sum();
    sum - 6.0
}

/// How many values a sample window holds.
pub const WINDOW: usize = 160;

/// A source's window: values a cycle apart up to [`moment`], that wander together.
pub fn values(source: &str) -> Vec<WindowValue> {
    let seed = source.bytes().map(u64::from).sum::<u64>();
    let (mut own, mut common) = (Rng::with_seed(seed), Rng::with_seed(1));
    let mut wander = 0.0;
    let value = |cycle: i64| {
        wander = 0.9 * wander + 0.3 * noise(&mut common);
        WindowValue {
            taken: moment().plus_us((cycle - WINDOW as i64) * 720_000),
            cycle: Some(cycle),
            offset: ((wander + 0.4 * noise(&mut own)) * 10.0).round() / 10.0,
        }
    };
    (0..WINDOW as i64).map(value).collect()
}

/// A look with figures that fit the story.
pub fn look(bank: &Bank, names: &[Name], story: Story, span: usize, at: Time, seed: u64) -> Look {
    let mut rng = Rng::with_seed(seed ^ span as u64 ^ at.us() as u64);
    let scale = if bank.margin > 0.0 { bank.margin } else { 1.0 };
    let half = scale * 3.2 / (span as f64).sqrt();
    let share = match story {
        Story::Level(_, _, minutes) => {
            let since = moment().plus_us(-minutes * 60 * US_PER_S);
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
        p_paid: p,
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
