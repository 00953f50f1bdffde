//! What the demo's story and the recordings rest on, measured on the model itself.

use super::*;

const CYCLES: u64 = 3_600;

/// Weights of `CYCLES` cycles from `from` on, one row per cycle.
fn rows(filler: &Filler, from: u64) -> Vec<[f64; HEADS]> {
    let row = |cycle| filler.weigh(cycle).map(Weight::grams);
    (from..from + CYCLES).map(row).collect()
}

fn mean(values: impl IntoIterator<Item = f64>) -> f64 {
    let (sum, n) = values
        .into_iter()
        .fold((0.0, 0.0), |(s, n), x| (s + x, n + 1.0));
    sum / n
}

fn sd(values: &[f64]) -> f64 {
    let centre = mean(values.iter().copied());
    mean(values.iter().map(|x| (x - centre).powi(2))).sqrt()
}

/// Residuals of one head from its cycle's mean.
fn residuals(rows: &[[f64; HEADS]], head: usize) -> Vec<f64> {
    let residual = |row: &[f64; HEADS]| row[head] - mean(row.iter().copied());
    rows.iter().map(residual).collect()
}

#[test]
fn it_is_a_function_of_seed_and_cycle() {
    let (a, b) = (Filler::new(7), Filler::new(7));
    assert_eq!(a.weigh(900), b.weigh(900));
    let forward: Vec<_> = (0..50).map(|c| a.weigh(c)).collect();
    let backward: Vec<_> = (0..50).rev().map(|c| b.weigh(c)).collect();
    assert!(forward.iter().eq(backward.iter().rev()));
    assert_ne!(a.weigh(900), a.weigh(901));
    assert_ne!(a.weigh(900), Filler::new(8).weigh(900));
}

#[test]
fn weights_are_written_in_tenths() {
    for (tenths, text) in [(5031, "503.1"), (5000, "500.0"), (9, "0.9"), (-25, "-2.5")] {
        assert_eq!(Weight(tenths).to_string(), text);
        assert_eq!(
            text.parse::<f64>().expect("a number"),
            Weight(tenths).grams()
        );
    }
}

#[test]
fn the_level_is_near_the_target_and_heads_are_alike() {
    for seed in [1, 2, 3, 2_026] {
        let rows = rows(&Filler::new(seed), 0);
        let all = mean(rows.iter().map(|r| mean(r.iter().copied())));
        assert!((all - TARGET_G).abs() < 1.5, "seed {seed}: mean {all}");
        let heads: Vec<f64> = (0..HEADS)
            .map(|h| mean(rows.iter().map(|r| r[h])))
            .collect();
        let high = heads.iter().copied().fold(f64::MIN, f64::max);
        let low = heads.iter().copied().fold(f64::MAX, f64::min);
        // The margin of the demo is 0.8 g; alike heads stay well inside it.
        assert!(
            high - low < 0.6,
            "seed {seed}: heads differ by {}",
            high - low
        );
    }
}

#[test]
fn all_heads_move_together_by_more_than_they_scatter() {
    for seed in [1, 2, 3, 2_026] {
        let rows = rows(&Filler::new(seed), 0);
        for head in 0..HEADS {
            let within = sd(&residuals(&rows, head));
            assert!((1.0..1.4).contains(&within), "seed {seed}: sd {within}");
        }
        // Over any 40 cycles too, which is what a look's short spans see.
        let common: Vec<f64> = rows
            .chunks(40)
            .map(|chunk| {
                let means: Vec<f64> = chunk.iter().map(|r| mean(r.iter().copied())).collect();
                sd(&means)
            })
            .collect();
        let typical = mean(common);
        assert!(typical > 2.0, "seed {seed}: common movement {typical}");
    }
}

#[test]
fn successive_residuals_do_not_depend_on_each_other() {
    let rows = rows(&Filler::new(2_026), 0);
    for head in 0..HEADS {
        let r = residuals(&rows, head);
        let centre = mean(r.iter().copied());
        let product = mean(r.windows(2).map(|w| (w[0] - centre) * (w[1] - centre)));
        let phi = product / sd(&r).powi(2);
        // Its standard error is 1/sqrt(3600) = 0.017.
        assert!(phi.abs() < 0.07, "head {head}: {phi}");
    }
}

#[test]
fn valves_wear_slowly() {
    let filler = Filler::new(2_026);
    let late = 40_000_000;
    let lost =
        |h: usize| mean(residuals(&rows(&filler, 0), h)) - mean(residuals(&rows(&filler, late), h));
    let worn: Vec<f64> = (0..3).map(lost).collect();
    let apart = worn.iter().copied().fold(f64::MIN, f64::max)
        - worn.iter().copied().fold(f64::MAX, f64::min);
    assert!(apart > 0.5, "after 40 million cycles: {worn:?}");
}

#[test]
fn a_spell_moves_its_head_only_and_ends() {
    let even = Filler::new(2_026);
    let spell = Spell {
        head: 6,
        trouble: Trouble::Level { offset_g: -3.5 },
        from: 100,
        ramp: 40,
        until: 1_000,
    };
    let low = even.clone().with_spells(vec![spell]);
    let apart =
        |cycle: u64, head: usize| low.weigh(cycle)[head].grams() - even.weigh(cycle)[head].grams();
    for cycle in [0, 99, 100, 120, 139, 500, 999, 1_000, 2_000] {
        for head in (0..HEADS).filter(|&h| h != 6) {
            assert_eq!(apart(cycle, head), 0.0);
        }
    }
    assert_eq!(apart(99, 6), 0.0);
    assert!((apart(119, 6) + 1.75).abs() < 0.2);
    assert!((mean((140..1_000).map(|c| apart(c, 6))) + 3.5).abs() < 0.05);
    assert_eq!(apart(1_000, 6), 0.0);
}

#[test]
fn an_erratic_head_scatters_by_its_factor_and_keeps_its_level() {
    let spell = Spell {
        head: 2,
        trouble: Trouble::Erratic { times: 3.0 },
        from: 0,
        ramp: 1,
        until: CYCLES,
    };
    let even = Filler::new(2_026);
    let wild = rows(&even.clone().with_spells(vec![spell]), 0);
    let calm = rows(&even, 0);
    let ratio = sd(&residuals(&wild, 2)) / sd(&residuals(&calm, 2));
    assert!((2.7..3.1).contains(&ratio), "{ratio}");
    let moved = mean(residuals(&wild, 2)) - mean(residuals(&calm, 2));
    assert!(moved.abs() < 0.15, "{moved}");
}

#[test]
fn a_new_target_moves_all_heads_alike() {
    let even = Filler::new(2_026);
    let change = Retarget {
        from: 50,
        target_g: 513.0,
    };
    let changed = even.clone().with_retarget(change);
    assert_eq!(even.weigh(49), changed.weigh(49));
    for (before, after) in even.weigh(50).iter().zip(changed.weigh(50)) {
        assert!((after.grams() - before.grams() - 10.0).abs() < 0.6);
    }
}
