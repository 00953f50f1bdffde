//! Follow-ups: intervals and p-values say the same, letters agree with pairs, adjustments are ordered.

use evenrow::stats::*;
use proptest::prelude::*;

fn groups() -> impl Strategy<Value = Vec<Vec<f64>>> {
    let value = (-640i32..640).prop_map(|v| f64::from(v) / 64.0);
    let spread =
        prop::collection::vec(value, 4..10).prop_filter("spread", |v| v.iter().any(|x| *x != v[0]));
    prop::collection::vec(spread, 3..7)
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 60, failure_persistence: None, ..Default::default() })]

    #[test]
    fn an_interval_excludes_zero_when_p_is_below_alpha(g in groups()) {
        let slices: Vec<&[f64]> = g.iter().map(Vec::as_slice).collect();
        let k = g.len();
        for pair in tukey_kramer(&slices).unwrap().into_iter().chain(games_howell(&slices).unwrap()) {
            let (low, high) = pair.interval(k, 0.05).unwrap();
            prop_assume!((pair.p_adjusted - 0.05).abs() > 1e-9);
            prop_assert_eq!(low > 0.0 || high < 0.0, pair.p_adjusted < 0.05);
        }
        let means = analysis_of_means(&slices, 0.05).unwrap().deviations;
        for d in dunnett(&slices, 0, Side::Both, 0.05).unwrap().into_iter().chain(means) {
            prop_assume!((d.p_adjusted - 0.05).abs() > 1e-9);
            prop_assert_eq!(d.low > 0.0 || d.high < 0.0, d.p_adjusted < 0.05);
        }
    }

    #[test]
    fn sources_share_a_letter_exactly_when_not_apart(
        k in 1usize..14, apart in prop::collection::vec(any::<bool>(), 14 * 14),
    ) {
        let differ = |a: usize, b: usize| apart[a.min(b) * 14 + a.max(b)];
        let order: Vec<usize> = (0..k).rev().collect();
        let letters = shared_letters(&order, differ);
        for a in 0..k {
            prop_assert!(!letters[a].is_empty());
            for b in a + 1..k {
                let share = letters[a].iter().any(|l| letters[b].contains(l));
                prop_assert_eq!(share, !differ(a, b), "{} and {}", a, b);
            }
        }
    }

    #[test]
    fn adjusted_p_values_are_ordered(p in prop::collection::vec(0.0f64..1.0, 1..20)) {
        let (holm, hochberg) = (holm(&p), hochberg(&p));
        let (fdr, bonferroni, sidak) = (benjamini_hochberg(&p), bonferroni(&p), sidak(&p));
        for i in 0..p.len() {
            let hair = 1.0 + 1e-12;
            prop_assert!(p[i] <= fdr[i] * hair && fdr[i] <= hochberg[i] * hair);
            prop_assert!(hochberg[i] <= holm[i] * hair && holm[i] <= bonferroni[i] * hair);
            prop_assert!(sidak[i] <= bonferroni[i] * hair && bonferroni[i] <= 1.0);
        }
    }
}

#[test]
fn equal_counts_make_analysis_of_means_exact_and_sharper() {
    let g: [&[f64]; 4] = [
        &[1.0, 2.0, 3.5],
        &[2.0, 2.5, 4.0],
        &[0.5, 3.0, 3.0],
        &[4.0, 5.5, 6.0],
    ];
    let exact = analysis_of_means(&g, 0.05).unwrap();
    assert!(exact.exact);
    let modulus = dist::maximum::Maximum::modulus(4).unwrap();
    for d in &exact.deviations {
        let bound = modulus.sf(d.difference.abs() / d.std_error, d.df).unwrap();
        assert!(d.p_adjusted <= bound);
    }
    let unequal: [&[f64]; 3] = [&[1.0, 2.0], &[2.0, 2.5, 4.0], &[0.5, 3.0, 3.0]];
    assert!(!analysis_of_means(&unequal, 0.05).unwrap().exact);
}

#[test]
fn cochran_is_a_bound_that_never_exceeds_one() {
    // Variances nearly equal: k P(B > C) is above one and is cut.
    let g: [&[f64]; 3] = [&[1.0, 2.0, 3.0], &[1.0, 2.0, 3.01], &[1.0, 2.0, 2.99]];
    assert_eq!(cochran_c(&g).unwrap().p, 1.0);
    let unequal: [&[f64]; 2] = [&[1.0, 2.0, 3.0], &[1.0, 2.0]];
    assert_eq!(cochran_c(&unequal).err(), Some(Degenerate::UnequalCounts));
}

#[test]
fn an_erratic_source_is_named() {
    let wave = |a: f64| {
        (0..60)
            .map(|i| a * ((i * 37 % 61) as f64 - 30.0))
            .collect::<Vec<f64>>()
    };
    let g = [wave(1.0), wave(1.05), wave(3.0), wave(0.95)];
    let slices: Vec<&[f64]> = g.iter().map(Vec::as_slice).collect();
    let named = spread_against_rest(&slices, 0.01).unwrap();
    let worst = named
        .iter()
        .min_by(|a, b| a.p_adjusted.total_cmp(&b.p_adjusted))
        .unwrap();
    assert_eq!(worst.source, 2);
    assert!(worst.low > 0.0 && worst.p_adjusted < 1e-6, "{worst:?}");
}
