//! Invariance under shift, scale, order of sources and of values; two sources as t; monotone tails.

use evenrow::stats::dist::{f, maximum_f_ratio, studentized_range, t};
use evenrow::stats::*;
use proptest::prelude::*;

/// Groups of two to twelve values on a grid of 1/64, so that shifts by small integers are exact.
fn groups() -> impl Strategy<Value = Vec<Vec<f64>>> {
    let value = (-640i32..640).prop_map(|v| f64::from(v) / 64.0);
    prop::collection::vec(prop::collection::vec(value, 2..12), 2..7)
}

fn slices(groups: &[Vec<f64>]) -> Vec<&[f64]> {
    groups.iter().map(Vec::as_slice).collect()
}

/// Statistic and p of every test on groups.
fn tests(groups: &[Vec<f64>]) -> Vec<Result<(f64, f64), Degenerate>> {
    let g = slices(groups);
    let plain = |t: Result<Test, Degenerate>| t.map(|t| (t.statistic, t.p));
    vec![
        plain(anova(&g).map(|a| a.test)),
        plain(welch(&g)),
        plain(brown_forsythe(&g)),
        plain(levene_mean(&g)),
        plain(bartlett(&g)),
        plain(max_f_ratio(&g).map(|r| r.test)),
        plain(kruskal_wallis(&g)),
    ]
}

fn agree(a: &[Vec<f64>], b: &[Vec<f64>]) -> Result<(), TestCaseError> {
    for (i, (a, b)) in tests(a).into_iter().zip(tests(b)).enumerate() {
        match (a, b) {
            (Ok(a), Ok(b)) => {
                let near = |x: f64, y: f64| (x - y).abs() <= 1e-9 * x.abs().max(1e-3);
                prop_assert!(
                    near(a.0, b.0) && near(a.1, b.1),
                    "test {}: {:?} and {:?}",
                    i,
                    a,
                    b
                );
            }
            (a, b) => prop_assert_eq!(a.is_err(), b.is_err(), "test {}", i),
        }
    }
    Ok(())
}

fn mapped(groups: &[Vec<f64>], f: impl Fn(f64) -> f64) -> Vec<Vec<f64>> {
    groups
        .iter()
        .map(|g| g.iter().map(|v| f(*v)).collect())
        .collect()
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 200, failure_persistence: None, ..Default::default() })]

    #[test]
    fn shift_and_scale_change_nothing(g in groups(), shift in -1_000_000i32..1_000_000, e in -20i32..20) {
        agree(&g, &mapped(&g, |v| v + f64::from(shift)))?;
        agree(&g, &mapped(&g, |v| v * 2.0_f64.powi(e)))?;
        agree(&g, &mapped(&g, |v| -v))?;
    }

    #[test]
    fn order_of_sources_and_values_changes_nothing(g in groups(), turn in 0usize..7) {
        let mut sources = g.clone();
        sources.rotate_left(turn % g.len());
        agree(&g, &sources)?;
        let reversed: Vec<Vec<f64>> = g.iter().map(|s| s.iter().rev().copied().collect()).collect();
        agree(&g, &reversed)?;
    }

    #[test]
    fn two_sources_are_student_and_welch(
        a in prop::collection::vec(-100i32..100, 2..15), b in prop::collection::vec(-100i32..100, 2..15),
    ) {
        let [a, b] = [a, b].map(|v| v.into_iter().map(f64::from).collect::<Vec<f64>>());
        let (sa, sb) = (summarize(&a), summarize(&b));
        prop_assume!(sa.ss > 0.0 && sb.ss > 0.0);
        let (na, nb) = (sa.n as f64, sb.n as f64);
        let df = na + nb - 2.0;
        let pooled = (sa.ss + sb.ss) / df;
        let student = (sa.mean - sb.mean) / (pooled * (1.0 / na + 1.0 / nb)).sqrt();
        let f = anova(&[&a, &b]).unwrap().test;
        prop_assert!((f.statistic - student * student).abs() <= 1e-12 * f.statistic.max(1e-6));
        let p = t::two_sided(student, df).unwrap();
        prop_assert!((f.p - p).abs() <= 1e-11 * p);
        let pair = tukey_kramer(&[&a, &b]).unwrap()[0];
        prop_assert!((pair.p_adjusted - p).abs() <= 1e-11 * p);
        let welch = welch(&[&a, &b]).unwrap();
        let pair = games_howell(&[&a, &b]).unwrap()[0];
        prop_assert!((pair.p_adjusted - welch.p).abs() <= 1e-11 * welch.p);
    }

    #[test]
    fn upper_tails_fall(x in 0.0f64..30.0, step in 1e-6f64..5.0, d1 in 1.0f64..80.0, d2 in 1.0f64..1e6, k in 2usize..40) {
        prop_assert!(f::sf(x + step, d1, d2).unwrap() <= f::sf(x, d1, d2).unwrap());
        prop_assert!(t::sf(x + step, d2).unwrap() <= t::sf(x, d2).unwrap());
        let table = studentized_range::table(k).unwrap();
        prop_assert!(table.sf(x + step, d2).unwrap() <= table.sf(x, d2).unwrap() * (1.0 + 1e-12));
        prop_assert!(table.sf(x, d2).unwrap() <= studentized_range::sf(x, k + 1, d2).unwrap() * (1.0 + 1e-12));
        let dfs = vec![d1; 1 + k / 8 + 1];
        prop_assert!(
            maximum_f_ratio::sf(1.0 + x + step, &dfs).unwrap() <= maximum_f_ratio::sf(1.0 + x, &dfs).unwrap() + 1e-13
        );
    }

    #[test]
    fn quantiles_invert_tails(p in 1e-12f64..0.999, df in 1.0f64..1e5, k in 2usize..30) {
        let q = studentized_range::isf(p, k, df).unwrap();
        prop_assert!((studentized_range::sf(q, k, df).unwrap() / p - 1.0).abs() < 1e-9);
        let x = f::isf(p, k as f64, df).unwrap();
        prop_assert!((f::sf(x, k as f64, df).unwrap() / p - 1.0).abs() < 1e-11);
        let x = t::isf(p, df).unwrap();
        prop_assert!((t::sf(x, df).unwrap() / p - 1.0).abs() < 1e-11);
    }

    #[test]
    fn merged_summaries_are_the_summary_of_all(
        a in prop::collection::vec(-1e3f64..1e3, 1..200), b in prop::collection::vec(-1e3f64..1e3, 1..200),
    ) {
        let all = [a.clone(), b.clone()].concat();
        let (merged, whole) = (summarize(&a).merge(&summarize(&b)), summarize(&all));
        prop_assert!((merged.mean - whole.mean).abs() < 1e-11);
        prop_assert!((merged.ss - whole.ss).abs() <= 1e-12 * whole.ss.max(1.0));
    }

    #[test]
    fn complete_blocks_are_the_textbook_analysis(
        rows in prop::collection::vec(prop::collection::vec(-1e3f64..1e3, 4), 3..20),
    ) {
        let mut blocks = Blocks::new(4);
        for row in &rows {
            blocks.push(row.iter().map(|v| Some(*v)));
        }
        let result = blocked_anova(&blocks).unwrap();
        let n = rows.len() as f64;
        let grand: f64 = rows.iter().flatten().sum::<f64>() / (4.0 * n);
        for (j, effect) in result.effects.iter().enumerate() {
            let mean = rows.iter().map(|r| r[j]).sum::<f64>() / n;
            prop_assert!((effect - (mean - grand)).abs() < 1e-9);
            prop_assert!((result.difference_variance(j, (j + 1) % 4) - 2.0 / n).abs() < 1e-12);
        }
        let sum: f64 = result.residuals.rows().flatten().sum();
        prop_assert!(sum.abs() < 1e-8);
    }
}
