//! State that goes on: written and read, joins and leaves, what was learnt.

use super::super::{Frozen, Part, Progress, Watch};
use super::{Bench, Rng, normal, ratio_of, sources, step, terms, watch_of};

#[test]
fn a_watch_read_back_goes_on_to_the_last_bit() {
    let mut rng = Rng::with_seed(2);
    let mut through = watch_of(12, terms(0.0));
    let mut stopped = through.clone();
    for place in 0..1_400_i64 {
        let values: Vec<f64> = (0..12)
            .map(|s| {
                let offset = if s == 1 && place > 1_300 { 1.5 } else { 0.0 };
                let missing = rng.below(20) == 0;
                if missing {
                    f64::NAN
                } else {
                    normal(&mut rng) + offset
                }
            })
            .collect();
        if [20, 77, 333, 801, 1_350].contains(&place) {
            let bytes = postcard::to_stdvec(&stopped).expect("it can be written");
            stopped = postcard::from_bytes::<Watch>(&bytes).expect("it can be read");
        }
        let found = step(&mut through, place, &values);
        assert_eq!(step(&mut stopped, place, &values), found, "{place}");
    }
    assert!(through == stopped);
    assert_eq!(through.readings(), stopped.readings());
    let bytes = postcard::to_stdvec(&through).expect("it can be written");
    assert!(bytes.len() < 12 * 10_000, "{} bytes", bytes.len());
}

#[test]
fn what_moves_all_alike_changes_nothing() {
    // Whole numbers of 1/1024, so that sums are exact and the residuals the same to the last bit.
    let grid = |x: f64| (x * 1024.0).round() / 1024.0;
    let mut rng = Rng::with_seed(4);
    let (mut still, mut moved) = (watch_of(12, terms(0.3)), watch_of(12, terms(0.3)));
    let mut walk = 0.0;
    for place in 0..900 {
        walk += grid(normal(&mut rng));
        let values: Vec<f64> = (0..12).map(|_| grid(normal(&mut rng))).collect();
        let lifted: Vec<f64> = values.iter().map(|v| v + walk).collect();
        let found = step(&mut still, place, &values);
        assert_eq!(step(&mut moved, place, &lifted), found);
    }
    assert!(still == moved);
}

#[test]
fn one_that_joins_leaves_the_evidence_of_the_others_alone() {
    let mut bench = Bench::learnt(12, 0.0, 8);
    let offset = |s: usize, z: f64| z + if s == 2 { 1.0 } else { 0.0 };
    assert_eq!(bench.run(15, offset), None);
    let before = ratio_of(&bench.watch, Part::Few);
    bench.watch.add_source();
    bench.watch.compare(&[true; 13]);
    bench.k = 13;
    // The threshold of thirteen is a little higher.
    let after = ratio_of(&bench.watch, Part::Few);
    assert!(after > 0.98 * before && after < before, "{before} {after}");
    let found = bench.run(60, offset).expect("a call");
    assert_eq!(found.leading, sources(&[2]));
    assert_eq!(bench.watch.contrast_blocks().sources.len(), 13);
}

#[test]
fn when_somebody_leaves_evidence_begins_afresh_and_sigma_stays() {
    let mut bench = Bench::learnt(12, 0.0, 8);
    bench.run(15, |s, z| z + if s == 2 { 1.0 } else { 0.0 });
    let sigma = bench.watch.figures().sigma;
    let who: Vec<bool> = (0..12).map(|s| s != 7).collect();
    bench.watch.compare(&who);
    assert_eq!(ratio_of(&bench.watch, Part::Few), 0.0);
    assert_eq!(bench.watch.progress(), Progress::Watching);
    assert_eq!(bench.watch.figures().sigma, sigma);
    let state = bench.watch.clone();
    bench.watch.compare(&who);
    assert!(state == bench.watch, "a repetition changes nothing");
    let alone: Vec<bool> = (0..12).map(|s| s == 7).collect();
    bench.watch.compare(&alone);
    assert_eq!(bench.watch.progress(), Progress::Alone);
}

#[test]
fn what_was_learnt_is_taken_up_and_has_to_prove_itself() {
    let learnt = Bench::learnt(12, 0.0, 6).watch.learnt().expect("learnt");
    for (noise, stays) in [(1.0, true), (2.0, false)] {
        let mut bench = Bench {
            watch: watch_of(12, terms(0.0)),
            rng: Rng::with_seed(7),
            place: 0,
            k: 12,
        };
        bench.watch.take_up(learnt.clone());
        assert!(matches!(bench.watch.progress(), Progress::Learning { .. }));
        assert_eq!(bench.run(150, |_, z| noise * z), None);
        let watching = bench.watch.progress() == Progress::Watching;
        assert_eq!(
            watching,
            stays,
            "noise {noise}: {:?}",
            bench.watch.progress()
        );
    }
}

#[test]
fn nothing_is_learnt_while_a_notice_is_open() {
    let mut bench = Bench::learnt(12, 9.0, 6);
    bench.watch.freeze(Frozen::Yes);
    let sigma = bench.watch.figures().sigma;
    bench.run(1_500, |_, z| 1.3 * z);
    assert_eq!(bench.watch.figures().sigma, sigma);
    bench.watch.freeze(Frozen::No);
    bench.run(1_500, |_, z| 1.3 * z);
    assert!(bench.watch.figures().sigma > sigma);
}

#[test]
fn the_past_adds_up() {
    let mut bench = Bench::learnt(4, 2.0, 12);
    bench.run(1_000, |s, z| z + if s == 0 { 0.8 } else { 0.0 });
    let past = bench.watch.contrast_blocks();
    let cycles: u32 = past.stretches.iter().map(|s| s.cycles).sum();
    assert_eq!(i64::from(cycles), bench.place);
    let places = past.stretches.iter().map(|s| s.at.place);
    assert!(places.is_sorted());
    let since = past.since(&[0], &[1, 2, 3], 0.0, 4.0 / 3.0);
    let since = since.expect("a start");
    let from = bench.place - 999;
    let set = since.earliest.place..=since.latest.place;
    assert!(set.contains(&from), "{since:?} {from}");
    for c in 0..4 {
        let count: u32 = past.stretches.iter().map(|s| s.counts[c]).sum();
        assert_eq!(count, cycles);
    }
}
