//! Hulls, windows and starts against going through everything.

use super::super::block::{self, Tally};
use super::super::contrast::{Judged, Means};
use super::super::hull::{Rise, Step};
use super::super::residual::median;
use super::super::rows::{HELD, Rows, Whole};
use super::{Rng, normal};
use crate::model::Time;
use crate::verdict::track::Moment;

fn moment(place: i64) -> Moment {
    Moment {
        place,
        taken: Time::from_us(place),
    }
}

#[test]
fn a_hull_finds_what_going_through_all_starts_finds() {
    for (seed, margin, drift) in [(1, 0.0, 0.0), (2, 0.3, 0.0), (3, 0.3, 0.5), (4, 0.0, -0.2)] {
        let mut rng = Rng::with_seed(seed);
        let mut rise = Rise::default();
        let mut all: Vec<(f64, f64)> = Vec::new();
        for cycle in 0..1_500 {
            // Information time varies as it does when values are missing.
            let time = 1.0 - 1.0 / (2 + rng.below(5)) as f64;
            let value = normal(&mut rng) + drift;
            all.push((time, value));
            let step = Step {
                time,
                value,
                cycle,
                at: moment(cycle as i64),
            };
            rise.add(&step, margin);
            let (mut n, mut sum, mut best) = (0.0, 0.0, (0.0, 0));
            for (start, (time, value)) in all.iter().enumerate().rev() {
                n += time;
                sum += value;
                let statistic = f64::max(sum - margin * n, 0.0).powi(2) / n;
                if statistic > best.0 {
                    best = (statistic, start);
                }
            }
            let (found, vertex) = rise.best(margin).expect("a start");
            assert!(
                (found - best.0).abs() < 1e-9 * best.0.max(1.0),
                "{seed} {cycle}"
            );
            assert!(
                best.0 < 1e-9 || vertex.cycle == best.1 as u64,
                "{seed} {cycle}"
            );
            assert!(best.0 < 1e-6 || rise.exceeds(margin, best.0 - 1e-6));
            assert!(!rise.exceeds(margin, best.0 + 1e-6));
        }
    }
}

/// 1 500 cycles of `k` sources, of which the second has every third value.
fn filled(k: usize, seed: u64) -> (Rows, Vec<Vec<f64>>) {
    let mut rng = Rng::with_seed(seed);
    let mut rows = Rows::new(k);
    let mut all = Vec::new();
    for cycle in 0..1_500 {
        let mut row: Vec<f64> = (0..k).map(|_| normal(&mut rng)).collect();
        if cycle % 3 != 0 {
            row[1] = f64::NAN;
        }
        rows.push(moment(cycle), &row);
        all.push(row);
    }
    (rows, all)
}

#[test]
fn windows_hold_what_was_put_in() {
    let (rows, all) = filled(4, 7);
    let (mut sums, mut counts) = (Vec::new(), Vec::new());
    for n in [1, 5, 6, 639, HELD] {
        if rows.window(n, &mut sums, &mut counts) == Whole::Yes {
            counts = vec![n as u16; 4];
        }
        for c in 0..4 {
            let newest = all.iter().rev().take(n).map(|row| row[c]);
            let there: Vec<f64> = newest.filter(|v| !v.is_nan()).collect();
            assert_eq!(usize::from(counts[c]), there.len(), "{n} {c}");
            assert!(
                (sums[c] - there.iter().sum::<f64>()).abs() < 1e-9,
                "{n} {c}"
            );
        }
        let cycle = all.len() - n;
        assert_eq!(rows.moment(n), Some(moment(cycle as i64)));
        let (held, put) = (rows.residual(1, n), all[cycle][1]);
        assert!(held.is_nan() && put.is_nan() || (held - put).abs() < 1e-9);
    }
    assert_eq!(rows.moment(HELD + 1), None);
}

#[test]
fn the_best_split_and_the_widest_pair_are_the_best_of_all() {
    for (seed, margin) in [(1, 0.0), (2, 0.2), (3, 1.0)] {
        let (rows, all) = filled(6, seed);
        let by = Judged {
            variance: 0.9,
            own: &[],
            factor: 1.0,
            margin,
            allowed: &[],
        };
        for n in [5_usize, 20, 320] {
            let mut means = Means::default();
            means.fill(&rows, n, &by);
            means.sort();
            // The second source has a third of its values and takes no part.
            let columns = [0, 2, 3, 4, 5];
            let mean = |c: usize| all.iter().rev().take(n).map(|r| r[c]).sum::<f64>() / n as f64;
            let of_group = |group: u32, inside: bool| {
                let chosen = columns.iter().enumerate();
                let chosen = chosen.filter(|(i, _)| (group >> i & 1 == 1) == inside);
                let values: Vec<f64> = chosen.map(|(_, c)| mean(*c)).collect();
                (
                    values.len() as f64,
                    values.iter().sum::<f64>() / values.len() as f64,
                )
            };
            let split = (1..31_u32).map(|group| {
                let ((g, a), (h, b)) = (of_group(group, true), of_group(group, false));
                (a - b - margin).max(0.0).powi(2) / 0.9 * n as f64 * g * h / 5.0
            });
            let best = split.fold(0.0, f64::max);
            let found = means.split(&by).expect("a split").statistic;
            assert!(
                (found - best).abs() < 1e-9 * best.max(1.0),
                "{seed} {n}: {found} {best}"
            );
            let pairs = columns
                .iter()
                .flat_map(|a| columns.map(|b| mean(*a) - mean(b)));
            let widest = (pairs.fold(0.0, f64::max) - margin).max(0.0);
            let range = widest * (n as f64 / 0.9).sqrt();
            let found = means.pair(&by).expect("a pair").statistic;
            assert!((found - range).abs() < 1e-9, "{seed} {n}: {found} {range}");
            let (squares, bound) = means.bounds(&by);
            assert!(
                squares >= best - 1e-9 && bound >= range - 1e-9,
                "{seed} {n}"
            );
        }
    }
}

#[test]
fn the_median_is_the_middle_one() {
    for (values, expected) in [
        (vec![3.0], 3.0),
        (vec![2.0, 1.0], 1.5),
        (vec![5.0, 1.0, 3.0], 3.0),
        (vec![4.0, 1.0, 3.0, 2.0], 2.5),
    ] {
        assert_eq!(median(&mut values.clone()), expected, "{values:?}");
    }
}

#[test]
fn blocks_show_correlation_without_bias_and_offsets_not_at_all() {
    for phi in [0.0, 0.3, 0.9] {
        let mut rng = Rng::with_seed(11);
        let (mut squares, mut products, mut df) = (0.0, 0.0, 0.0);
        let mut x = 0.0;
        for _ in 0..2_000 {
            let mut tally = Tally::default();
            for _ in 0..block::CYCLES {
                x = phi * x + f64::sqrt(1.0 - phi * phi) * normal(&mut rng);
                tally.add(x + 7.0, 1.0);
            }
            let share = tally.close(0).expect("a full block");
            squares += share.squares;
            products += share.products;
            df += share.df;
        }
        let found = block::correlation(products / squares);
        assert!((found - phi).abs() < 0.01, "{phi}: {found}");
        let variance = squares / df / block::squares_kept(found.max(0.0));
        assert!((variance - 1.0).abs() < 0.05, "{phi}: {variance}");
    }
}
