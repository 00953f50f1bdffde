//! Banks whose sources share no cycle: there the look decides, and its power over every span says how
//! surely a fault is called once the window holds nothing else.
//!
//! Windows are simulated and examined as the engine does. A call is counted only when the window holds
//! no value from before the fault, so calls come at least as surely and as soon. Deliberately absent:
//! what moves all sources together; without pairing nothing takes it out.

use crate::model::{Bank, Budget, SourceIx, Time, Value};
use crate::verdict::{Asked, Look, Need, Participant, Shares, Usual, examine};
use crate::window::{Arriving, Windows};

use super::assumed::Assumed;
use super::noise::Noise;
use super::outcome::Outcome;
use super::scene::Scene;

/// Windows simulated for each fault at most: the standard error of a share is at most 0.05.
const TRIALS: usize = 100;
/// Sources times values that are examined for a fault at most; fewer trials beyond. Twelve sources with the
/// usual spans get 39 (0.08), so that a plan ends in some 20 seconds on two threads.
const WORK: usize = 1_200_000;
/// Fewest windows that say anything.
const FEWEST_TRIALS: usize = 20;
/// How much longer the next longer span is; the usual spans grow by this too.
const NEXT: usize = 4;

/// What one simulated window's look over one span says, before any budget is asked.
#[derive(Clone, Copy, Debug)]
struct Said {
    span: usize,
    level_p: f64,
    /// 1 where no source's spread is beyond the spread margin.
    spread_p: f64,
}

/// The simulated windows of one fault under one margin.
pub struct Windowed {
    said: Vec<Vec<Said>>,
}

/// The bank with one more span, longer than all others.
pub fn with_next_span(bank: &Bank) -> Bank {
    let next = bank.window_length().saturating_mul(NEXT);
    let mut longer = bank.clone();
    longer.spans.push(next);
    longer
}

impl Windowed {
    /// Simulates and examines; `bank` has every span that anybody will ask for.
    pub fn of(assumed: &Assumed, bank: &Bank, scene: &Scene, seed: u64) -> Self {
        let values = bank.window_length().saturating_mul(assumed.sources).max(1);
        let trials = (WORK / values).clamp(FEWEST_TRIALS, TRIALS);
        // So large a budget that nothing is kept back: what is named is told whatever its p.
        let mut open = bank.clone();
        open.budget = Budget::new(1e9, 1e-3).unwrap_or(bank.budget);
        let trial = |t: usize| {
            let looks = look(assumed, &open, scene, seed.wrapping_add(t as u64));
            looks.iter().map(said).collect()
        };
        Self {
            said: (0..trials).map(trial).collect(),
        }
    }

    /// How surely and how soon a bank (margins as simulated; its own spans, looks and budget) calls.
    pub fn outcome(&self, assumed: &Assumed, bank: &Bank) -> Outcome {
        let shares = Shares::overlapping(bank, assumed.sources, assumed.interval_us);
        let power = |span: &usize| {
            let calls = |trial: &&Vec<Said>| {
                let over = trial.iter().find(|s| s.span == *span);
                over.is_some_and(|s| s.level_p < shares.level || s.spread_p < shares.spread)
            };
            let fill_us = assumed.interval_us.saturating_mul(*span as i64);
            let at = fill_us.saturating_add(bank.look_every_us);
            (at, self.said.iter().filter(calls).count())
        };
        let powers: Vec<(i64, usize)> = bank.spans.iter().map(power).collect();
        Outcome::of_looks(&powers, self.said.len())
    }
}

fn said(look: &Look) -> Said {
    let named_spread = look.sources.iter().any(|s| s.named_spread);
    let spread_p = look.spread_test().filter(|_| named_spread);
    Said {
        span: look.span,
        level_p: look.level_test().map_or(1.0, |t| t.p_paid),
        spread_p: spread_p.map_or(1.0, |t| t.p_paid),
    }
}

/// One look at windows that hold nothing but the fault.
fn look(assumed: &Assumed, bank: &Bank, scene: &Scene, seed: u64) -> Vec<Look> {
    let mut noise = Noise::new(assumed, bank.characteristic.resolution, seed);
    let fault = scene.fault(assumed.sources);
    let mut windows = Windows::new(bank);
    (0..assumed.sources).for_each(|_| windows.add_source());
    let mut values = Vec::new();
    let mut at = Time::default();
    for _ in 0..bank.window_length() {
        at = at.plus_us(assumed.interval_us);
        noise.next(&fault, &mut values);
        for (s, value) in values.iter().enumerate() {
            deliver(&mut windows, s, *value, at);
        }
    }
    let participant = |s: usize| Participant {
        source: SourceIx(s as u16),
        name: s.to_string().into(),
        margin: bank.margin,
        silent: false,
        usual: Some(Usual::default()),
    };
    let who: Vec<Participant> = (0..assumed.sources).map(participant).collect();
    let asked = Asked {
        at,
        need: Need::WholeSpan,
        interval_us: Some(assumed.interval_us),
        crossing: None,
        open: None,
    };
    examine(bank, &windows, &who, asked).looks
}

fn deliver(windows: &mut Windows, source: usize, value: f64, taken: Time) {
    let arriving = Value::from_f64(value).map(|value| Arriving {
        source: SourceIx(source as u16),
        value,
        taken,
        time_given: true,
        cycle: None,
    });
    if let Ok(arriving) = arriving {
        // A finite value with a time of its own is no double and needs no cycle.
        let _ = windows.accept(&arriving);
    }
}
