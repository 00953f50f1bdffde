//! What must hold for windows, on examples and on arbitrary sequences.

use proptest::prelude::*;

use super::*;
use crate::model::{
    Bank, Budget, Characteristic, Layout, Offsets, Pairing, Reason, SourceIx, Sources, Time,
    US_PER_S, Value,
};

fn bank(pairing: Pairing, spans: &[usize]) -> Bank {
    Bank {
        name: "filler-2".into(),
        equipment: None,
        characteristic: Characteristic {
            name: "net content".into(),
            unit: "g".into(),
            resolution: None,
            target: None,
            declared: None,
            lower: None,
            upper: None,
        },
        sources: Sources::Discover { most: 8 },
        pairing,
        spans: spans.to_vec(),
        look_every_us: 30 * US_PER_S,
        margin: 0.0,
        spread_margin: 1.5,
        budget: Budget::new(1.0, 90.0).unwrap(),
        wait_cycles: 3,
        silent_after_us: None,
        oldest_us: i64::MAX,
        layout: Layout::Row,
        groups: Vec::new(),
        cost_per_unit: None,
        reference: None,
        offsets: Offsets::None,
    }
}

fn windows(pairing: Pairing, sources: usize) -> Windows {
    let mut windows = Windows::new(&bank(pairing, &[2, 4]));
    for _ in 0..sources {
        windows.add_source();
    }
    windows
}

fn value(source: u16, second: i64, cycle: Option<i64>) -> Arriving {
    Arriving {
        source: SourceIx(source),
        value: Value::parse(&format!("50{}.{}", source % 10, second.rem_euclid(10))).unwrap(),
        taken: Time::from_us(second * US_PER_S),
        time_given: true,
        cycle,
    }
}

fn places(windows: &Windows, source: u16) -> Vec<i64> {
    let ring = windows.ring(SourceIx(source));
    ring.iter().map(|e| e.place).collect()
}

fn counts(windows: &Windows) -> (u64, u64, u64) {
    windows.blocks().unwrap().counts()
}

#[test]
fn a_cycle_closes_when_all_have_delivered() {
    let mut w = windows(Pairing::Cycle, 3);
    for s in 0..3 {
        assert_eq!(counts(&w).0, 0);
        assert_eq!(w.accept(&value(s, 1, Some(1))), Ok(Accepted::InTurn));
    }
    assert_eq!(counts(&w), (1, 0, 0));
}

#[test]
fn a_cycle_closes_on_a_sources_third_newer_one_and_then_values_are_late() {
    let mut w = windows(Pairing::Cycle, 3);
    for cycle in 1..=3 {
        for s in 0..2 {
            w.accept(&value(s, cycle, Some(cycle))).unwrap();
        }
    }
    assert_eq!(counts(&w), (0, 0, 3));
    w.accept(&value(0, 4, Some(4))).unwrap();
    assert_eq!(counts(&w), (1, 0, 3));
    assert_eq!(w.accept(&value(2, 1, Some(1))), Ok(Accepted::Late));
    assert_eq!(w.accept(&value(2, 2, Some(2))), Ok(Accepted::InTurn));
    assert_eq!(places(&w, 2), [1, 2]);
}

#[test]
fn a_cycle_with_fewer_than_half_is_skipped() {
    let mut w = windows(Pairing::Cycle, 5);
    for cycle in 1..=4 {
        for s in 0..2 {
            w.accept(&value(s, cycle, Some(cycle))).unwrap();
        }
    }
    assert_eq!(counts(&w), (0, 1, 3));
}

#[test]
fn nobody_waits_for_a_source_that_is_not_expected() {
    let mut w = windows(Pairing::Cycle, 3);
    w.accept(&value(0, 1, Some(1))).unwrap();
    w.accept(&value(1, 1, Some(1))).unwrap();
    w.expect(SourceIx(2), false);
    assert_eq!(counts(&w), (1, 0, 0));
}

#[test]
fn a_slot_closes_one_slot_past_its_end_and_keeps_the_newest_value() {
    let mut w = windows(
        Pairing::Slot {
            length_us: 10 * US_PER_S,
        },
        2,
    );
    w.accept(&value(0, 1, None)).unwrap();
    w.accept(&value(0, 3, None)).unwrap();
    w.accept(&value(0, 2, None)).unwrap();
    let kept: Vec<_> = w
        .ring(SourceIx(0))
        .iter()
        .map(|e| e.taken.us() / US_PER_S)
        .collect();
    assert_eq!(kept, [3]);
    w.accept(&value(0, 19, None)).unwrap();
    assert_eq!(counts(&w), (0, 0, 2));
    w.accept(&value(0, 20, None)).unwrap();
    assert_eq!(counts(&w), (0, 1, 2));
    assert_eq!(w.accept(&value(1, 5, None)), Ok(Accepted::Late));
}

#[test]
fn doubles_are_refused() {
    let mut w = windows(Pairing::Cycle, 2);
    w.accept(&value(0, 1, Some(1))).unwrap();
    assert_eq!(w.accept(&value(0, 1, Some(1))), Err(Reason::Double));
    assert_eq!(w.accept(&value(0, 9, Some(1))), Err(Reason::Double));
    assert_eq!(w.accept(&value(1, 1, None)), Err(Reason::NoCycle));
    let mut w = windows(Pairing::None, 2);
    w.accept(&value(0, 1, None)).unwrap();
    assert_eq!(w.accept(&value(0, 1, None)), Err(Reason::Double));
    w.accept(&value(1, 1, None)).unwrap();
    // Without a time of its own nothing proves a double: received times may coincide.
    let unstamped = Arriving {
        time_given: false,
        ..value(0, 1, None)
    };
    assert_eq!(w.accept(&unstamped), Ok(Accepted::InTurn));
}

#[test]
fn a_counter_that_starts_again_goes_on() {
    let mut w = windows(Pairing::Cycle, 2);
    for cycle in 100..104 {
        for s in 0..2 {
            w.accept(&value(s, cycle, Some(cycle))).unwrap();
        }
    }
    for s in 0..2 {
        assert_eq!(w.accept(&value(s, 104, Some(0))), Ok(Accepted::InTurn));
        assert_eq!(w.accept(&value(s, 105, Some(1))), Ok(Accepted::InTurn));
    }
    assert_eq!(places(&w, 0), [102, 103, 104, 105]);
    assert_eq!(places(&w, 1), [102, 103, 104, 105]);
    assert_eq!(counts(&w), (6, 0, 0));
    // What was counted before the restart and taken then still finds its place.
    assert_eq!(w.accept(&value(0, 103, Some(103))), Err(Reason::Double));
}

#[test]
fn what_starts_fresh_leaves_older_values_out() {
    let mut w = windows(Pairing::None, 1);
    for second in 1..=4 {
        w.accept(&value(0, second, None)).unwrap();
    }
    w.start_fresh(SourceIx(0), 3 * US_PER_S);
    assert_eq!(w.ring(SourceIx(0)).fresh().count(), 2);
    assert_eq!(w.ring(SourceIx(0)).len(), 4);
}

proptest! {
    #[test]
    fn rings_stay_short_ordered_and_free_of_doubles(
        arrivals in prop::collection::vec((0_u16..3, 0_i64..60, 0_i64..40), 0..300),
        paired in any::<bool>(),
    ) {
        let mut w = windows(if paired { Pairing::Cycle } else { Pairing::None }, 3);
        for (s, second, cycle) in arrivals {
            let before = w.ring(SourceIx(s)).len();
            let taken_in = w.accept(&value(s, second, Some(cycle))).is_ok();
            let ring = w.ring(SourceIx(s));
            prop_assert!(ring.len() <= 4);
            prop_assert!(taken_in || ring.len() == before);
            let order: Vec<i64> = ring.iter().map(|e| e.place).collect();
            prop_assert!(order.is_sorted());
            let mut once = order.clone();
            once.dedup();
            prop_assert_eq!(once, order, "no place twice");
        }
        if let Some(blocks) = w.blocks() {
            prop_assert!(blocks.counts().2 <= 256 + 1);
        }
    }
}
