//! Input without an answer is a named outcome; finite input never panics and never gives NaN.

use evenrow::stats::*;
use proptest::prelude::*;

type Outcome = Result<(), Degenerate>;

/// Every test on groups, by name; a NaN in its answer is a failure of its own.
fn all(groups: &[&[f64]]) -> Vec<(&'static str, Outcome)> {
    let test = |t: Result<Test, Degenerate>| {
        t.map(|t| {
            assert!(
                t.p >= 0.0 && t.p <= 1.0 && !t.statistic.is_nan(),
                "{t:?} of {groups:?}"
            );
        })
    };
    let pairs = |p: Result<Vec<Pair>, Degenerate>| {
        p.map(|p| {
            for pair in p {
                let fine = (0.0..=1.0).contains(&pair.p_adjusted) && pair.std_error >= 0.0;
                assert!(fine && pair.df > 0.0, "{pair:?} of {groups:?}");
            }
        })
    };
    let deviations = |d: Result<Vec<Deviation>, Degenerate>| {
        d.map(|d| {
            for one in d {
                let fine = (0.0..=1.0).contains(&one.p_adjusted) && one.low <= one.high;
                assert!(fine, "{one:?} of {groups:?}");
            }
        })
    };
    vec![
        ("anova", test(anova(groups).map(|a| a.test))),
        ("welch", test(welch(groups))),
        ("brown_forsythe", test(brown_forsythe(groups))),
        ("levene_mean", test(levene_mean(groups))),
        ("bartlett", test(bartlett(groups))),
        ("max_f_ratio", test(max_f_ratio(groups).map(|r| r.test))),
        ("cochran_c", test(cochran_c(groups))),
        ("kruskal_wallis", test(kruskal_wallis(groups))),
        ("friedman", test(friedman(&columns(groups)))),
        (
            "blocked_anova",
            test(blocked_anova(&columns(groups)).map(|b| b.test)),
        ),
        ("tukey_kramer", pairs(tukey_kramer(groups))),
        ("games_howell", pairs(games_howell(groups))),
        ("dunn", pairs(dunn(groups))),
        (
            "each_against_rest",
            deviations(each_against_rest(groups, 0.05)),
        ),
        (
            "spread_against_rest",
            deviations(spread_against_rest(groups, 0.05)),
        ),
        (
            "lag_one",
            lag_one(groups).map(|l| assert!(l.phi.abs() <= 1.0 && l.std_error >= 0.0)),
        ),
    ]
}

/// Every test on one series.
fn series(values: &[f64]) -> Vec<(&'static str, Outcome)> {
    let test = |t: Result<Test, Degenerate>| {
        t.map(|t| {
            assert!(
                t.p >= 0.0 && t.p <= 1.0 && !t.statistic.is_nan(),
                "{t:?} of {values:?}"
            );
        })
    };
    vec![
        ("shapiro_wilk", test(shapiro_wilk(values))),
        ("anderson_darling", test(anderson_darling(values))),
        ("ljung_box", test(ljung_box(values, 2))),
        ("von_neumann_ratio", test(von_neumann_ratio(values))),
        ("median_outliers", median_outliers(values, 3.5).map(|_| ())),
        (
            "generalised_esd",
            generalised_esd(values, 2, 0.05).map(|_| ()),
        ),
        (
            "ties",
            ties(values, Some(0.1)).map(|t| assert!((0.0..=1.0).contains(&t.share))),
        ),
    ]
}

fn columns(groups: &[&[f64]]) -> Blocks {
    let mut blocks = Blocks::new(groups.len());
    for row in 0..groups.iter().map(|g| g.len()).max().unwrap_or(0) {
        blocks.push(groups.iter().map(|g| g.get(row).copied()));
    }
    blocks
}

fn expect(groups: &[&[f64]], outcome: Degenerate, except: &[(&str, Option<Degenerate>)]) {
    for (name, got) in all(groups) {
        let special = except.iter().find(|(n, _)| *n == name).map(|(_, o)| *o);
        let want = special.unwrap_or(Some(outcome));
        assert_eq!(got.err(), want, "{name} of {groups:?}");
    }
}

#[test]
fn fewer_than_two_sources_are_named() {
    let lag = ("lag_one", None);
    expect(&[&[1.0, 2.0, 4.0]], Degenerate::FewerThanTwoSources, &[lag]);
    let none = ("lag_one", Some(Degenerate::TooFewSources { needed: 1 }));
    expect(&[], Degenerate::FewerThanTwoSources, &[none]);
}

#[test]
fn values_that_are_all_equal_are_named() {
    expect(
        &[&[3.0, 3.0, 3.0], &[3.0, 3.0, 3.0]],
        Degenerate::AllEqual,
        &[],
    );
}

#[test]
fn values_that_are_not_finite_are_named() {
    for bad in [f64::NAN, f64::INFINITY, f64::NEG_INFINITY] {
        // In blocks NaN is a missing cell, and an infinite value spoils its block.
        let in_blocks = if bad.is_nan() {
            None
        } else {
            Some(Degenerate::NotFinite)
        };
        let groups: [&[f64]; 2] = [&[1.0, bad, 2.5, 4.0], &[2.0, 4.0, 4.5, 4.25]];
        for (name, got) in all(&groups) {
            let want = match name {
                "blocked_anova" | "friedman" => in_blocks,
                _ => Some(Degenerate::NotFinite),
            };
            assert_eq!(got.err(), want, "{name} with {bad}");
        }
        for (name, got) in series(&[1.0, 2.0, bad, 4.0, 5.0, 6.0, 7.0, 9.0]) {
            assert_eq!(got.err(), Some(Degenerate::NotFinite), "{name} with {bad}");
        }
    }
}

#[test]
fn sources_without_spread_that_differ_are_named() {
    let groups: [&[f64]; 3] = [&[1.0, 1.0, 1.0], &[2.0, 2.0, 2.0], &[2.0, 2.0, 2.0]];
    let none = |name| (name, None);
    expect(
        &groups,
        Degenerate::ZeroSpreadWithin,
        &[
            // Ranks have an answer, and spreads that are all zero are all equal.
            none("kruskal_wallis"),
            none("friedman"),
            none("dunn"),
            ("brown_forsythe", Some(Degenerate::AllEqual)),
            ("levene_mean", Some(Degenerate::AllEqual)),
            ("spread_against_rest", Some(Degenerate::AllEqual)),
            ("lag_one", Some(Degenerate::AllEqual)),
        ],
    );
}

#[test]
fn one_source_without_spread_is_named_where_it_matters() {
    let groups: [&[f64]; 3] = [&[1.0, 2.0, 4.0], &[2.0, 2.0, 2.0], &[1.0, 3.0, 7.0]];
    let still = Degenerate::ZeroSpread { source: 1 };
    for (name, got) in all(&groups) {
        let matters = ["welch", "bartlett", "max_f_ratio"].contains(&name);
        assert_eq!(got.err(), matters.then_some(still), "{name}");
    }
    let two: [&[f64]; 3] = [&[1.0, 2.0, 4.0], &[2.0, 2.0, 2.0], &[5.0, 5.0, 5.0]];
    assert_eq!(games_howell(&two).err(), Some(still));
}

#[test]
fn too_few_values_are_named_with_their_source() {
    let short = Degenerate::TooFewValues {
        source: 1,
        needed: 2,
    };
    let groups: [&[f64]; 2] = [&[1.0, 2.0], &[3.0]];
    for (name, got) in all(&groups) {
        if [
            "welch",
            "bartlett",
            "games_howell",
            "brown_forsythe",
            "cochran_c",
        ]
        .contains(&name)
        {
            assert_eq!(got.err(), Some(short), "{name}");
        }
    }
    let single: [&[f64]; 2] = [&[1.0], &[3.0]];
    assert_eq!(
        anova(&single).err(),
        Some(Degenerate::TooFewValues {
            source: 0,
            needed: 2
        })
    );
    let empty: [&[f64]; 2] = [&[], &[3.0]];
    assert_eq!(
        anova(&empty).err(),
        Some(Degenerate::TooFewValues {
            source: 0,
            needed: 1
        })
    );
}

#[test]
fn values_beyond_squaring_are_named() {
    for scale in [1e200, 1e-200] {
        let groups: [&[f64]; 2] = [&[1.0 * scale, 2.0 * scale, 4.0 * scale], &[2.0 * scale; 3]];
        assert_eq!(anova(&groups).err(), Some(Degenerate::OutOfRange));
        let one = [1.0, 2.0, 5.0, 1.0, 2.0, 5.0, 7.0, 8.0].map(|v| v * scale);
        assert_eq!(shapiro_wilk(&one).err(), Some(Degenerate::OutOfRange));
    }
}

#[test]
fn blocks_that_do_not_connect_are_named() {
    let rows: Vec<Vec<Option<f64>>> = vec![
        vec![Some(1.0), Some(2.0), None, None],
        vec![Some(1.5), Some(2.5), None, None],
        vec![None, None, Some(3.0), Some(4.0)],
        vec![None, None, Some(3.5), Some(4.75)],
    ];
    let got = blocked_anova(&Blocks::from_rows(&rows));
    assert_eq!(got.err(), Some(Degenerate::DisconnectedBlocks));
}

#[test]
fn exactly_additive_blocks_have_no_finite_statistic() {
    let mut blocks = Blocks::new(3);
    for level in [0.0, 1.0, 4.0, 2.0] {
        blocks.push([Some(level), Some(level + 0.5), Some(level - 0.25)]);
    }
    assert_eq!(
        blocked_anova(&blocks).err(),
        Some(Degenerate::ZeroSpreadWithin)
    );
}

#[test]
fn every_outcome_reads_as_a_sentence() {
    let outcomes = [
        Degenerate::FewerThanTwoSources,
        Degenerate::TooFewValues {
            source: 2,
            needed: 3,
        },
        Degenerate::ZeroSpread { source: 0 },
        Degenerate::Distribution(dist::OutOfReach::NotANumber),
    ];
    let texts = outcomes.map(|o| o.to_string());
    assert_eq!(texts[1], "source 3 has fewer than 3 values");
    assert!(texts.iter().all(|t| t.len() > 10), "{texts:?}");
}

/// Finite values of every size, with ties and exact repeats.
fn value() -> impl Strategy<Value = f64> {
    prop_oneof![
        any::<f64>().prop_filter("finite", |v| v.is_finite()),
        (-50i32..50).prop_map(|v| f64::from(v) / 4.0),
        Just(0.0),
        Just(1e12),
        (-1000i32..1000).prop_map(|v| 1e9 + f64::from(v) * 1e-3),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 400, failure_persistence: None, ..Default::default() })]

    #[test]
    fn finite_groups_never_panic_or_give_nan(
        groups in prop::collection::vec(prop::collection::vec(value(), 0..9), 0..6),
    ) {
        let groups: Vec<&[f64]> = groups.iter().map(Vec::as_slice).collect();
        prop_assert_eq!(all(&groups).len(), 16);
    }

    #[test]
    fn finite_series_never_panic_or_give_nan(values in prop::collection::vec(value(), 0..40)) {
        prop_assert_eq!(series(&values).len(), 7);
    }

    #[test]
    fn distributions_answer_between_0_and_1_or_refuse(
        x in any::<f64>(), a in any::<f64>(), b in 0.1f64..1e7, k in 0usize..600,
    ) {
        use dist::{beta, chi_square, f, t, studentized_range};
        let answers = [
            chi_square::sf(x, b), t::sf(x, b), f::sf(x, b, a.abs().min(1e9)), beta::sf(x, b, a.abs().min(1e9)),
            studentized_range::sf(x, k % 12, b), chi_square::sf(x, a), t::sf(b, a), f::sf(b, a, b),
        ];
        for p in answers.into_iter().flatten() {
            prop_assert!((0.0..=1.0).contains(&p), "{}", p);
        }
    }
}
