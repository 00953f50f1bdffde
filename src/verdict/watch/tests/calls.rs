//! What is called, and what is not.

use super::super::{Part, Progress};
use super::{Bench, Rng, normal, ratio_of, sources, terms, watch_of};
use crate::model::SourceIx;
use crate::verdict::track::Aspect;

/// A change after learning, and the first call that it must lead to.
struct Case {
    name: &'static str,
    k: usize,
    margin: f64,
    change: fn(usize, f64) -> f64,
    part: Part,
    leading: &'static [u16],
    within: usize,
}

const CASES: &[Case] = &[
    Case {
        name: "one of twelve, 1 sd up",
        k: 12,
        margin: 0.0,
        change: |s, z| z + if s == 3 { 1.0 } else { 0.0 },
        part: Part::Few,
        leading: &[3],
        within: 80,
    },
    Case {
        name: "one of four, 1.5 sd down beyond a margin",
        k: 4,
        margin: 0.5,
        change: |s, z| z - if s == 1 { 2.0 } else { 0.0 },
        part: Part::Few,
        leading: &[1],
        within: 60,
    },
    Case {
        name: "two sources 1.5 sd apart",
        k: 2,
        margin: 0.0,
        change: |s, z| z + if s == 1 { 1.5 } else { 0.0 },
        part: Part::Few,
        leading: &[0, 1],
        within: 60,
    },
    Case {
        name: "half of twelve beyond a margin",
        k: 12,
        margin: 0.5,
        change: |s, z| z + if s < 6 { 0.9 } else { 0.0 },
        part: Part::Split,
        leading: &[0, 1, 2, 3, 4, 5],
        within: 200,
    },
    Case {
        name: "two opposite, nobody the margin from the others",
        k: 12,
        margin: 1.0,
        change: |s, z| z + [0.0, 0.9, 0.0, -0.9].get(s).copied().unwrap_or(0.0),
        part: Part::Pair,
        leading: &[1, 3],
        within: 400,
    },
    Case {
        name: "one turns erratic",
        k: 12,
        margin: 0.0,
        change: |s, z| if s == 5 { 3.0 * z } else { z },
        part: Part::Erratic,
        leading: &[5],
        within: 100,
    },
    Case {
        name: "one goes quiet",
        k: 12,
        margin: 0.0,
        change: |s, z| if s == 5 { 0.1 * z } else { z },
        part: Part::Quiet,
        leading: &[5],
        within: 200,
    },
];

#[test]
fn what_leaves_is_called_by_its_part() {
    for case in CASES {
        let mut bench = Bench::learnt(case.k, case.margin, 5);
        let from = bench.place + 1;
        let found = bench.run(case.within, case.change);
        let found = found.unwrap_or_else(|| panic!("{}: nothing was called", case.name));
        assert_eq!(found.part, case.part, "{}: {found:?}", case.name);
        let mut leading = found.leading.clone();
        leading.sort();
        assert_eq!(leading, sources(case.leading), "{}", case.name);
        let (earliest, latest) = (found.earliest.place, found.latest.place);
        let set = earliest..=latest;
        assert!(set.contains(&from), "{}: {from} not in {set:?}", case.name);
        assert!(set.contains(&found.start.place), "{}: {found:?}", case.name);
        assert!(found.ratio > 1.0, "{}", case.name);
        assert_eq!(found.aspect, case.part.aspect());
    }
}

#[test]
fn a_step_of_level_is_never_called_a_change_of_spread() {
    // 3 sd beyond a margin of nothing is called as level; 4 sd within a margin of 5 is not called at all.
    for (margin, size, calls) in [(0.0, 3.0, true), (5.0, 4.0, false)] {
        for seed in 0..12 {
            let mut bench = Bench::learnt(12, margin, 100 + seed);
            let found = bench.run(120, |s, z| z + if s == 2 { size } else { 0.0 });
            let aspect = found.map(|f| f.aspect);
            let expected = calls.then_some(Aspect::Level);
            assert_eq!(aspect, expected, "margin {margin}, seed {seed}");
        }
    }
}

#[test]
fn a_jump_of_all_sources_and_more_noise_in_all_are_even() {
    let mut bench = Bench::learnt(12, 0.0, 9);
    assert_eq!(bench.run(100, |_, z| z + 20.0), None);
    let mut bench = Bench::learnt(12, 5.0, 9);
    assert_eq!(bench.run(300, |_, z| 1.5 * z), None);
}

#[test]
fn offsets_within_the_margin_call_nobody() {
    for seed in 0..3 {
        let mut bench = Bench::learnt(12, 0.5, 40 + seed);
        let found = bench.run(1_500, |s, z| z + if s < 4 { 0.45 } else { 0.0 });
        assert_eq!(found, None, "seed {seed}");
    }
}

#[test]
fn values_that_stand_still_are_a_state_of_their_own() {
    let mut watch = watch_of(3, terms(0.0));
    for place in 0..300 {
        assert_eq!(super::step(&mut watch, place, &[1.0, 1.0, 1.0]), None);
    }
    assert_eq!(watch.progress(), Progress::Still);
    // With a resolution there is a sigma, and a source that leaves by some steps is seen.
    let with_resolution = super::Terms {
        resolution: Some(0.1),
        ..terms(0.0)
    };
    let mut watch = watch_of(12, with_resolution);
    for place in 0..700 {
        assert_eq!(super::step(&mut watch, place, &[1.0; 12]), None, "{place}");
    }
    assert_eq!(watch.progress(), Progress::Watching);
    assert!(watch.figures().from_resolution);
    let mut apart = [1.0; 12];
    apart[4] = 1.2;
    let found = (700..800).find_map(|place| super::step(&mut watch, place, &apart));
    assert_eq!(found.expect("a call").leading, sources(&[4]));
}

#[test]
fn missing_values_delay_and_do_not_hide() {
    let mut bench = Bench::learnt(12, 0.0, 21);
    let missing = |s: usize, z: f64| s == 7 || s < 3 && z > 0.5;
    let change = |s: usize, z: f64| {
        let offset = if s == 5 { 1.5 } else { 0.0 };
        if missing(s, z) { f64::NAN } else { z + offset }
    };
    let found = bench.run(100, change).expect("a call");
    assert_eq!(found.leading, sources(&[5]));
}

#[test]
fn a_cleared_source_is_watched_with_its_own_margin() {
    let offset = |s: usize, z: f64| z + if s == 3 { 0.35 } else { 0.0 };
    let mut bench = Bench::learnt(12, 0.0, 33);
    bench.watch.set_margin(SourceIx(3), 0.5);
    assert_eq!(bench.run(1_500, offset), None);
    bench.watch.set_margin(SourceIx(3), 0.0);
    let found = bench.run(500, offset).expect("a call");
    assert_eq!(found.leading.first(), Some(&SourceIx(3)));
}

#[test]
fn noise_that_is_not_normal_is_scored() {
    let mut bench = Bench::learnt(12, 0.0, 1);
    assert!(bench.watch.learner.learnt.scores().is_none());
    bench.watch.forget_learnt();
    assert_eq!(bench.run(700, |_, z| (0.6 * z).exp()), None);
    assert!(bench.watch.learner.learnt.scores().is_some());
    let found = bench.run(60, |s, z| (0.6 * z).exp() + if s == 2 { 1.0 } else { 0.0 });
    assert_eq!(found.expect("a call").leading, sources(&[2]));
    assert!(ratio_of(&bench.watch, Part::Few) > 1.0);
}

#[test]
fn sources_with_sds_of_their_own_are_weighed() {
    let noisy = |s: usize, z: f64| if s == 0 { 1.4 * z } else { z };
    let mut watch = watch_of(8, terms(0.0));
    let mut rng = Rng::with_seed(3);
    for place in 0..2_200 {
        let values: Vec<f64> = (0..8).map(|s| noisy(s, normal(&mut rng))).collect();
        assert_eq!(super::step(&mut watch, place, &values), None, "{place}");
    }
    let own = watch.figures().own_sigma;
    assert_eq!(own.len(), 8);
    for (source, sigma) in own {
        let expected = noisy(source.index(), 1.0);
        assert!((sigma / expected - 1.0).abs() < 0.08, "{source:?}: {sigma}");
    }
}
