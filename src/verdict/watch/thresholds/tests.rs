//! The closed forms against printed values, sums, limits and each other.

mod simulated;

use super::nu::{nu, stays_below};
use super::split::{Split, squares};
use super::starts::{self, Streams};
use super::*;
use crate::stats::dist::normal;

/// k, mean cycles to a false call, z. Source: methods §4, the form of Siegmund and Venkatraman 1995 at
/// a margin of 0, few part alone, printed to 0.01.
const PRINTED: &[(usize, f64, f64)] = &[
    (4, 5e3, 4.51),
    (12, 5e3, 4.76),
    (60, 5e3, 5.11),
    (4, 5e4, 5.02),
    (12, 5e4, 5.25),
    (60, 5e4, 5.56),
    (4, 1e6, 5.61),
    (12, 1e6, 5.81),
    (60, 1e6, 6.09),
    (4, 1e7, 6.02),
    (12, 1e7, 6.21),
    (60, 1e7, 6.47),
];

fn basis(sources: usize, margin_sd: f64) -> Basis {
    Basis {
        sources,
        margin_sd,
        spread_margin: 1.5,
        cycles_per_false_call: 5e4,
        phi: 0.0,
        df: f64::INFINITY,
    }
}

#[test]
fn few_alone_meets_the_printed_table() {
    for &(k, cycles, z) in PRINTED {
        let found = starts::threshold(1.0 / cycles, |s| starts::worst_rate(s, k, 0.0));
        assert!(
            (found - z).abs() <= 0.01,
            "k {k}, {cycles} cycles: {found}, printed {z}"
        );
    }
}

/// The definition, summed until the terms no longer count.
fn nu_summed(x: f64) -> f64 {
    let terms = (1..).map(|n| {
        let n = f64::from(n);
        normal::cdf(-0.5 * x * n.sqrt()) / n
    });
    let sum: f64 = terms.take_while(|t| *t > 1e-10).sum();
    2.0 / (x * x) * (-2.0 * sum).exp()
}

#[test]
fn nu_is_near_its_definition() {
    for x in [0.1, 0.3, 0.6, 1.0, 1.4, 2.0, 3.0, 5.0, 8.0] {
        let ratio = nu_summed(x) / nu(x);
        assert!((0.999..1.022).contains(&ratio), "x {x}: {ratio}");
    }
    assert!((nu(1e-5) - nu(2.1e-4)).abs() < 2e-4, "the series joins");
}

#[test]
fn the_rate_is_the_sum_over_every_stretch() {
    for (b, inside) in [(4.0, 0.0), (4.5, 0.03), (5.5, 0.2), (6.0, 0.0), (5.0, 1.5)] {
        let term = |n: u32| {
            let root = f64::from(n).sqrt();
            let inward = b / (2.0 * root);
            let stays = stays_below(inward) * stays_below(inward + inside);
            normal::sf(b + inside * root) * stays * stays
        };
        let whole: f64 = (1..=10_000).map(term).sum();
        let ratio = Streams::new(b).rate(inside) / whole;
        assert!(
            (ratio - 1.0).abs() < 2e-3,
            "b {b}, inside {inside}: {ratio}"
        );
    }
}

/// Every group, every rate by itself.
fn worst_rate_by_hand(streams: &Streams, sources: usize, margin_sd: f64) -> f64 {
    let k = sources as f64;
    let margin = margin_sd * ((k - 1.0) / k).sqrt();
    let both = |offset: f64| streams.rate(margin - offset) + streams.rate(margin + offset);
    let groups = (0..=sources / 2).map(|g| {
        let g = g as f64;
        let top = if g > 0.0 {
            g * both(margin * (k - g) / (k - 1.0))
        } else {
            0.0
        };
        top + (k - g) * both(margin * g / (k - 1.0))
    });
    groups.fold(0.0, f64::max)
}

#[test]
fn the_worst_offsets_are_found_from_the_table_of_rates() {
    for (k, margin) in [
        (3, 0.3),
        (4, 0.02),
        (12, 0.25),
        (60, 1.0),
        (60, 0.1),
        (5, 6.0),
    ] {
        let streams = Streams::new(5.0);
        let found = starts::worst_rate(&streams, k, margin);
        let ratio = found / worst_rate_by_hand(&streams, k, margin);
        assert!(
            (ratio - 1.0).abs() < 3e-3,
            "k {k}, margin {margin}: {ratio}"
        );
    }
    // The residuals of two sources mirror each other: one pair of streams.
    let streams = Streams::new(4.5);
    let ratio = starts::worst_rate(&streams, 3, 0.0) / starts::worst_rate(&streams, 2, 0.0);
    assert_eq!(ratio, 3.0);
}

/// ln of the union bound at the worst group, every split of every group counted.
fn ln_union_by_hand(k: usize, z: f64, reach: f64) -> f64 {
    let ln_choose = |n: usize, r: usize| {
        (1..=r)
            .map(|i| ((n - r + i) as f64 / i as f64).ln())
            .sum::<f64>()
    };
    let bound = |g: usize| {
        let mut sum = 0.0;
        for a in 0..=g {
            for c in 0..=k - g {
                let t = a + c;
                if t == 0 || t == k {
                    continue;
                }
                let (tf, rest) = (t as f64, (k - t) as f64);
                // As printed in methods §4.
                let mean = a as f64 / tf - (g - a) as f64 / rest;
                let beyond = (1.0 - mean) * reach * (tf * rest / k as f64).sqrt();
                sum += (ln_choose(g, a) + ln_choose(k - g, c)).exp() * normal::sf(z + beyond);
            }
        }
        sum
    };
    (1..k).map(bound).fold(0.0, f64::max).ln()
}

#[test]
fn the_split_bound_counts_what_counts() {
    for k in [4, 5, 12, 31, 60] {
        for reach in [0.3, 1.0, 3.0, 10.0, 40.0] {
            let alpha = 1e-6;
            let ceiling = squares(alpha, k, f64::INFINITY).sqrt();
            let at_ceiling = ln_union_by_hand(k, ceiling, reach);
            match Split::new(k).union(alpha, reach, ceiling) {
                None => assert!(at_ceiling > alpha.ln() - 0.02, "k {k}, reach {reach}"),
                Some(root) => {
                    let z = root.moved(0.0);
                    let miss = ln_union_by_hand(k, z, reach) - alpha.ln();
                    assert!(miss.abs() < 0.03, "k {k}, reach {reach}, z {z}: {miss}");
                }
            }
        }
    }
}

#[test]
fn a_root_moves_with_its_probability() {
    let ceiling = squares(1e-6, 12, f64::INFINITY).sqrt();
    let root = |alpha: f64| {
        Split::new(12)
            .union(alpha, 2.0, ceiling)
            .map(|r| r.moved(0.0))
    };
    let moved = Split::new(12)
        .union(1e-6, 2.0, ceiling)
        .map(|r| r.moved(1.4_f64.ln()));
    let (moved, solved) = (moved.expect("a root"), root(1.4e-6).expect("a root"));
    assert!((moved - solved).abs() < 2e-3, "{moved} {solved}");
}

#[test]
fn the_range_bound_takes_over_with_the_margin() {
    let alpha = 1e-6;
    for k in [3, 4, 12, 60] {
        let range = pair::range_quantile(alpha, k, f64::INFINITY);
        assert_eq!(pair::quantile(alpha, k, 0.0, f64::INFINITY), range, "k {k}");
        // Far apart only the pairs across count.
        let across = ((k / 2) * (k - k / 2)) as f64;
        let z = normal::isf(alpha / across).expect("a quantile");
        let found = pair::quantile(alpha, k, 50.0, f64::INFINITY);
        assert!((found - z * std::f64::consts::SQRT_2).abs() < 1e-4, "k {k}");
    }
    let more = pair::range_quantile(alpha, 501, f64::INFINITY);
    let tabled = pair::range_quantile(alpha, 500, f64::INFINITY);
    assert!(more > tabled && more < tabled + 0.05, "{more} {tabled}");
}

#[test]
fn windows_apart_share_by_looks_and_overlap_gives_more() {
    let rate = 1e-5;
    let alpha = |windows: &[(f64, f64)], kind: Kind| {
        Overlap {
            windows,
            kind,
            clusters: 1.0,
        }
        .alpha(rate)
    };
    for kind in [
        Kind::Contrast,
        Kind::Squares { sources: 12 },
        Kind::Range { sources: 12 },
    ] {
        let apart = alpha(&[(40.0, 400.0)], kind) / (rate * 400.0);
        assert!((0.99..1.05).contains(&apart), "{kind:?}: {apart}");
        let overlapping = alpha(&[(40.0, 1.0)], kind) / rate;
        assert!((2.0..5.0).contains(&overlapping), "{kind:?}: {overlapping}");
        let two = alpha(&[(40.0, 4.0), (160.0, 4.0)], kind);
        assert!(two < alpha(&[(40.0, 4.0)], kind), "{kind:?}");
    }
    for silly in [f64::NAN, -1.0, 0.0, f64::INFINITY] {
        let overlap = Overlap {
            windows: &[(0.0, 0.0), (f64::NAN, 1.0)],
            kind: Kind::Squares { sources: 0 },
            clusters: 1.0,
        };
        let found = overlap.alpha(silly);
        assert!((1e-15..=0.5).contains(&found), "{silly}: {found}");
    }
}

#[test]
fn a_source_at_the_spread_margin_scores_zero_on_average() {
    for turn in [Turn::Erratic, Turn::Quiet] {
        let at = if turn == Turn::Erratic {
            1.5
        } else {
            1.0 / 1.5
        };
        assert!(scores::mean_step(at, 1.5, turn).abs() < 1e-9, "{turn:?}");
        assert!(scores::mean_step(1.0, 1.5, turn) < -0.4, "{turn:?}");
    }
    // E of the score of 1.5 |Z| by the midpoint rule over |Z| in 200 000 equal probabilities.
    let steps = 200_000;
    let score = |i: i32| {
        let tail = (f64::from(i) + 0.5) / f64::from(steps);
        let e = normal::isf(0.5 * tail).expect("inside (0, 1)");
        normal::isf(2.0 * normal::sf(1.5 * e)).expect("inside (0, 1)")
    };
    let mean = (0..steps).map(score).sum::<f64>() / f64::from(steps);
    let found = scores::mean_step(1.5, 1.0, Turn::Erratic);
    assert!((found - mean).abs() < 1e-4, "{found} {mean}");
}

/// Every threshold in one row, none as nothing.
fn row(t: &Thresholds) -> Vec<f64> {
    let spans = |part: &Option<Vec<f64>>| part.clone().unwrap_or_default();
    let mut all = vec![t.few];
    all.extend(spans(&t.split).into_iter().chain(spans(&t.pair)));
    all.extend(t.erratic.into_iter().chain(t.quiet));
    all
}

#[test]
fn thresholds_move_the_right_way() {
    let check = |what: &str, low: &Basis, high: &Basis| {
        let (low, high) = (row(&thresholds(low)), row(&thresholds(high)));
        assert_eq!(low.len(), high.len(), "{what}");
        for (i, (l, h)) in low.iter().zip(&high).enumerate() {
            assert!(*h >= l - 2e-3 * l, "{what}, number {i}: {l} then {h}");
        }
        assert!(high[0] > low[0], "{what}");
    };
    for margin in [0.0, 0.1, 0.5] {
        for pair in [4, 5, 8, 12, 30, 60, 200, 500].windows(2) {
            check(
                "more sources",
                &basis(pair[0], margin),
                &basis(pair[1], margin),
            );
        }
        for k in [2, 3, 4, 12, 60] {
            let plain = basis(k, margin);
            let rarer = Basis {
                cycles_per_false_call: 2e5,
                ..plain.clone()
            };
            check("a smaller budget", &plain, &rarer);
            let dependent = Basis {
                phi: 0.1,
                ..plain.clone()
            };
            check("less dependence", &dependent, &plain);
            let estimated = Basis {
                df: 500.0,
                ..plain.clone()
            };
            check("fewer degrees", &plain, &estimated);
            let narrower = basis(k, margin * 0.7 - 1e-3);
            if margin > 0.0 {
                check("a smaller margin", &plain, &narrower);
            }
        }
    }
}

#[test]
fn estimated_sigma_tends_to_the_known() {
    for margin in [0.0, 0.4] {
        let known = row(&thresholds(&basis(12, margin)));
        let nearly = row(&thresholds(&Basis {
            df: 1e9,
            ..basis(12, margin)
        }));
        for (k, n) in known.iter().zip(&nearly) {
            assert!((n / k - 1.0).abs() < 1e-4, "{k} {n}");
        }
    }
}

#[test]
fn any_basis_gives_finite_thresholds() {
    let silly = [
        f64::NAN,
        f64::NEG_INFINITY,
        -1.0,
        0.0,
        1e-300,
        0.3,
        1e5,
        f64::INFINITY,
    ];
    for k in [0, 1, 2, 3, 4, 7, 501, 2_000] {
        for x in silly {
            for which in 0..5 {
                let mut b = basis(k, 0.3);
                match which {
                    0 => b.margin_sd = x,
                    1 => b.spread_margin = x,
                    2 => b.cycles_per_false_call = x,
                    3 => b.phi = x,
                    _ => b.df = x,
                }
                let all = row(&thresholds(&b));
                assert!(
                    all.iter().all(|t| t.is_finite() && *t > 0.5),
                    "{b:?}: {all:?}"
                );
            }
        }
    }
}

#[test]
fn the_account_shows_every_part_that_is_on() {
    for (k, parts) in [(2, 1), (3, 4), (4, 5), (60, 5)] {
        let basis = basis(k, 0.2);
        let account = account(&basis, &thresholds(&basis));
        assert_eq!(account.parts.len(), parts, "k {k}");
        for entry in &account.parts {
            let spans = matches!(entry.part, Part::Split | Part::Pair);
            let rows = if spans { SPANS.len() } else { 1 };
            assert_eq!(entry.thresholds.len(), rows, "k {k}, {:?}", entry.part);
            let given = 5e4 / entry.share;
            assert!((entry.cycles_per_false_call / given - 1.0).abs() < 1e-12);
        }
        let shares: f64 = account.parts.iter().map(|e| e.share).sum();
        assert!((0.8..1.3).contains(&shares), "k {k}: {shares}");
    }
}

#[test]
fn dependence_costs_smoothly() {
    // Simulated, relative to independence: one stream, z = 4, first-order autoregressive noise.
    let simulated = [
        (0.0, 1.0),
        (0.02, 1.12),
        (0.05, 1.31),
        (0.09, 1.55),
        (0.15, 1.98),
        (0.2, 2.36),
        (0.3, 3.12),
        (0.45, 4.80),
    ];
    for (phi, factor) in simulated {
        let found = dependence::factor(phi);
        assert!(
            (found / factor - 1.0).abs() < 0.05,
            "{phi}: {found} {factor}"
        );
    }
    assert_eq!(dependence::factor(-0.5), 1.0);
    assert!((dependence::factor(0.9) / 38.0 - 1.0).abs() < 0.02);
}
