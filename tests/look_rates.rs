//! How often the look's deciding tests call when nothing is wrong, simulated, and that a step of level
//! is never called a change of spread.
//!
//! Rates are those of whole examinations at a share that is large enough to be counted. The source of
//! the expectation is the union bound: realised at most nominal.

#[path = "common/line.rs"]
mod line;

use evenrow::model::{Bank, Budget, Pairing, SourceIx, US_PER_S};
use evenrow::model::{Time, Value};
use evenrow::verdict::{Asked, Aspect, Need, Participant, Shares, Usual, examine};
use evenrow::window::{Arriving, Windows};
use line::{Normal, bank, head};

/// One simulated window: a value for (source, cycle).
struct Case<'a> {
    k: usize,
    span: usize,
    pairing: Pairing,
    value: &'a dyn Fn(&mut Normal, usize, usize) -> f64,
}

/// A budget with which one look spends `alpha` in all.
fn with_alpha(mut bank: Bank, alpha: f64) -> Bank {
    let day_us = 86_400 * US_PER_S;
    bank.look_every_us = day_us;
    bank.budget = Budget::new(alpha, 1.0).expect("a budget");
    bank
}

fn windows(case: &Case, bank: &Bank, noise: &mut Normal) -> Windows {
    let mut windows = Windows::new(bank);
    for _ in 0..case.k {
        windows.add_source();
    }
    for c in 0..case.span {
        for s in 0..case.k {
            let value = (case.value)(noise, s, c);
            let arriving = Arriving {
                source: SourceIx(s as u16),
                value: Value::from_f64(value).expect("finite"),
                taken: Time::from_us((c as i64 + 1) * US_PER_S),
                time_given: true,
                cycle: Some(c as i64),
            };
            windows.accept(&arriving).expect("taken in");
        }
    }
    windows
}

/// (share called for level, share called for spread) of `runs` windows, at `alpha` for the whole look.
fn called(case: &Case, alpha: f64, margin: f64, runs: usize, seed: u64) -> (f64, f64) {
    let mut bank = with_alpha(bank(case.k), alpha);
    bank.spans = vec![case.span];
    bank.pairing = case.pairing;
    bank.margin = margin;
    bank.spread_margin = 1.0001;
    let participant = |s: usize| Participant {
        source: SourceIx(s as u16),
        name: head(s + 1),
        margin,
        silent: false,
        usual: Some(Usual::default()),
    };
    let who: Vec<Participant> = (0..case.k).map(participant).collect();
    let mut noise = Normal::new(seed);
    let mut counts = [0_usize; 2];
    for _ in 0..runs {
        let windows = windows(case, &bank, &mut noise);
        let asked = Asked {
            at: Time::from_us(US_PER_S),
            need: Need::WholeSpan,
            interval_us: None,
            crossing: None,
            open: None,
        };
        let exam = examine(&bank, &windows, &who, asked);
        for call in exam.calls {
            counts[usize::from(call.aspect == Aspect::Spread)] += 1;
        }
    }
    (
        counts[0] as f64 / runs as f64,
        counts[1] as f64 / runs as f64,
    )
}

/// Realised over nominal rates may exceed one by what `runs` let chance do: four standard errors.
fn check_rate(name: &str, realised: f64, nominal: f64, runs: usize) {
    let chance = 4.0 * (nominal / runs as f64).sqrt();
    assert!(
        realised <= nominal + chance,
        "{name}: {realised} called, {nominal} allowed, {runs} runs"
    );
}

#[test]
fn alike_sources_are_called_no_more_often_than_the_share_allows() {
    let alike = |noise: &mut Normal, _: usize, _: usize| noise.next();
    for (k, span, pairing, margin) in [
        (2, 10, Pairing::Cycle, 0.0),
        (3, 10, Pairing::Cycle, 0.0),
        (4, 40, Pairing::Cycle, 0.0),
        (12, 10, Pairing::Cycle, 0.0),
        (4, 10, Pairing::None, 0.0),
        (4, 40, Pairing::None, 0.2),
    ] {
        let case = Case {
            k,
            span,
            pairing,
            value: &alike,
        };
        let runs = 200_000 / (k * span);
        let alpha = 0.05;
        let (level, spread) = called(&case, alpha, margin, runs, 7);
        let shares = Shares::of(&with_alpha(
            Bank {
                spans: vec![span],
                pairing,
                ..bank(k)
            },
            alpha,
        ));
        let name = format!("k {k}, span {span}, {pairing:?}");
        check_rate(&format!("{name}, level"), level, shares.level, runs);
        check_rate(&format!("{name}, spread"), spread, shares.spread, runs);
        // And the test is not asleep: with margin 0 it calls at least a twentieth as often.
        assert!(
            margin > 0.0 || level > shares.level / 20.0,
            "{name}: level never called"
        );
    }
}

#[test]
fn dependence_is_paid_for() {
    // First-order autoregression of 0.5, with which plain tests at 5 % err in 69 %.
    let last = std::cell::RefCell::new([0.0; 4]);
    let value = |noise: &mut Normal, s: usize, c: usize| {
        let mut last = last.borrow_mut();
        let before = if c == 0 {
            noise.next() / 0.75_f64.sqrt()
        } else {
            last[s]
        };
        last[s] = 0.5 * before + noise.next();
        last[s]
    };
    let case = Case {
        k: 4,
        span: 160,
        pairing: Pairing::Cycle,
        value: &value,
    };
    let (level, _) = called(&case, 0.05, 0.0, 400, 11);
    check_rate("autoregression", level, 0.04 * 1.5, 400);
}

#[test]
fn a_step_of_level_is_no_change_of_spread() {
    for (size, at) in [(2.5, 20), (2.5, 80), (3.0, 120), (6.0, 80)] {
        let stepped = |noise: &mut Normal, s: usize, c: usize| {
            noise.next() + if s == 3 && c >= at { size } else { 0.0 }
        };
        let case = Case {
            k: 12,
            span: 160,
            pairing: Pairing::Cycle,
            value: &stepped,
        };
        let (level, spread) = called(&case, 1e-4, 0.0, 60, 13);
        assert_eq!(
            spread, 0.0,
            "a step of {size} at {at} is called a change of spread"
        );
        assert!(
            level > 0.9,
            "a step of {size} at {at} is not called: {level}"
        );
    }
}

#[test]
fn an_erratic_source_is_found_under_common_movement() {
    // methods of the look: 12 heads, n = 160, one at twice the sd, p < 2e-8, under a common random walk
    // of step 1 sd; found in 100 % on residuals (simulated for the design, about 0 % on raw values).
    let walk = std::cell::RefCell::new(0.0);
    let value = |noise: &mut Normal, s: usize, _: usize| {
        if s == 0 {
            *walk.borrow_mut() += noise.next();
        }
        *walk.borrow() + noise.next() * if s == 5 { 2.0 } else { 1.0 }
    };
    let case = Case {
        k: 12,
        span: 160,
        pairing: Pairing::Cycle,
        value: &value,
    };
    let (_, spread) = called(&case, 1e-7, 0.0, 60, 17);
    assert!(spread > 0.95, "found in {spread}");
}
