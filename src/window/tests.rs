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
fn values_of_one_time_with_other_numbers_are_no_doubles() {
    let mut w = windows(Pairing::None, 2);
    w.accept(&value(0, 1, Some(7))).unwrap();
    assert_eq!(w.accept(&value(0, 1, Some(8))), Ok(Accepted::InTurn));
    assert_eq!(w.accept(&value(0, 1, Some(7))), Err(Reason::Double));
    assert_eq!(w.accept(&value(0, 1, Some(8))), Err(Reason::Double));
    // Another source's numbers prove nothing, nor does a payload without one.
    assert_eq!(w.accept(&value(1, 1, Some(7))), Ok(Accepted::InTurn));
    assert_eq!(w.accept(&value(0, 1, None)), Err(Reason::Double));
    w.accept(&value(0, 2, Some(9))).unwrap();
    // What is no longer remembered counts as a double: nothing enters twice.
    assert_eq!(w.accept(&value(0, 1, Some(10))), Err(Reason::Double));
}

/// A value whose payload says neither when it was taken nor anything else but its number.
fn unstamped(source: u16, second: i64, cycle: i64) -> Arriving {
    Arriving {
        time_given: false,
        ..value(source, second, Some(cycle))
    }
}

#[test]
fn a_counter_without_times_that_starts_again_inside_the_window_goes_on() {
    let mut w = windows(Pairing::Cycle, 2);
    for cycle in 0..4 {
        for s in 0..2 {
            w.accept(&unstamped(s, 100 + cycle, cycle)).unwrap();
        }
    }
    // A redelivery repeats the values too, however many come.
    for _ in 0..3 {
        for cycle in 0..4 {
            let again = w.accept(&unstamped(0, 100 + cycle, cycle));
            assert_eq!(again, Err(Reason::Double));
        }
    }
    // Other values under rising numbers that are held already: the fourth settles it.
    for cycle in 0..3 {
        let doubted = w.accept(&unstamped(0, 205 + cycle, cycle));
        assert_eq!(doubted, Err(Reason::Double));
    }
    assert_eq!(w.accept(&unstamped(0, 208, 3)), Ok(Accepted::InTurn));
    assert_eq!(w.accept(&unstamped(1, 208, 3)), Ok(Accepted::InTurn));
    assert_eq!(places(&w, 0), [1, 2, 3, 4]);
    assert_eq!(w.accept(&unstamped(0, 209, 4)), Ok(Accepted::InTurn));
    assert_eq!(places(&w, 0), [2, 3, 4, 5]);
}

#[test]
fn closed_cycles_are_handed_over_once_with_what_is_there() {
    let mut w = windows(Pairing::Cycle, 3);
    for (source, cycle) in [(0, 1), (1, 1), (2, 1), (0, 2), (2, 2)] {
        w.accept(&value(source, cycle, Some(cycle))).unwrap();
    }
    assert_eq!(w.take_closed(), [1]);
    assert_eq!(w.take_closed(), [0_i64; 0]);
    for cycle in 3..=5 {
        w.accept(&value(0, cycle, Some(cycle))).unwrap();
    }
    assert_eq!(w.take_closed(), [2]);
    let mut values = Vec::new();
    let taken = w.cycle(2, &mut values);
    assert_eq!(taken, Some(Time::from_us(2 * US_PER_S)));
    assert!(values[0].is_finite() && values[1].is_nan() && values[2].is_finite());
    w.start_fresh(SourceIx(0), 3);
    w.cycle(2, &mut values);
    assert!(values[0].is_nan());
    assert_eq!(w.cycle(99, &mut values), None);
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
        let mut known = std::collections::BTreeSet::new();
        for (s, second, cycle) in arrivals {
            let before = w.ring(SourceIx(s)).len();
            let taken_in = w.accept(&value(s, second, Some(cycle))).is_ok();
            let ring = w.ring(SourceIx(s));
            prop_assert!(ring.len() <= 4);
            prop_assert!(taken_in || ring.len() == before);
            let order: Vec<i64> = ring.iter().map(|e| e.place).collect();
            prop_assert!(order.is_sorted());
            known.insert((s, second, cycle));
            for place in &order {
                let held = order.iter().filter(|p| *p == place).count();
                let sent = known.iter().filter(|k| k.0 == s && k.1 * US_PER_S == *place);
                prop_assert!(paired || held <= sent.count(), "nothing stands there twice");
            }
            if paired {
                let mut once = order.clone();
                once.dedup();
                prop_assert_eq!(once, order, "no cycle twice");
            }
        }
        if let Some(blocks) = w.blocks() {
            prop_assert!(blocks.counts().2 <= 256 + 1);
        }
    }
}
