//! Follow-ups against other programs, and where none has them against closed forms for two sources.

use crate::fixtures::{json, slices};
use crate::table::{Row, Worst};
use crate::worked::data;
use evenrow::stats::dist::maximum::Maximum;
use evenrow::stats::dist::{beta, f, normal, t};
use evenrow::stats::{
    Blocks, analysis_of_means, analysis_of_means_from, anova, blocked_anova,
    brown_forsythe_summaries, cochran_c, dunn, dunn_interval, each_against_rest,
    each_against_rest_from, letters_text, max_f_ratio, median_outliers, shared_letters,
    spread_against_rest, summarize, welch,
};

pub fn rows(out: &mut Vec<Row>) {
    let mut push = |statistic, covers, source, allowed, worst| {
        out.push(Row {
            statistic,
            covers,
            source,
            allowed,
            worst,
        });
    };
    let covers = &["dunn", "dunn_interval"];
    push(
        "Dunn with Holm",
        covers,
        "scikit-posthocs 0.17.1",
        2e-14,
        dunn_test(),
    );
    let covers = &["analysis_of_means", "analysis_of_means_from"];
    let source = "closed forms: t for two sources, maximum modulus for unequal counts";
    push("analysis of means", covers, source, 1e-14, means());
    let covers = &[
        "each_against_rest",
        "each_against_rest_from",
        "spread_against_rest",
    ];
    push(
        "each against the rest",
        covers,
        "Welch's t for two sources; by hand",
        5e-15,
        rest(),
    );
    let covers = &["max_f_ratio", "cochran_c"];
    push(
        "extreme variances",
        covers,
        "F and beta for two sources",
        1e-15,
        variances(),
    );
    let covers = &["tukey"];
    push(
        "Tukey within blocks",
        covers,
        "paired t for two sources",
        2e-15,
        blocks(),
    );
    let covers = &["shared_letters", "letters_text", "median_outliers"];
    push(
        "letters, outliers by MAD",
        covers,
        "by hand: exact agreement",
        1.0,
        letters(),
    );
}

fn dunn_test() -> Worst {
    let mut worst = Worst::new();
    let all = json("reference/worked_examples.json");
    let examples = all["examples"].as_array().expect("examples");
    let sprays = data("R_InsectSprays");
    let small: Vec<Vec<f64>> = vec![
        vec![1.0, 2.0, 3.0, 5.0, 1.0],
        vec![12.0, 31.0, 54.0],
        vec![10.0, 12.0, 6.0, 74.0, 11.0],
    ];
    for (id, groups) in [
        ("dunn_scikit_posthocs", small),
        ("dunn_InsectSprays", sprays),
    ] {
        let example = examples
            .iter()
            .find(|e| e["id"] == id)
            .expect("the example");
        let pairs = dunn(&slices(&groups)).expect("not degenerate");
        for pair in &pairs {
            let want = example["recomputed"]["dunn_holm"][pair.a][pair.b]
                .as_f64()
                .expect("p");
            worst.relative(pair.p_adjusted, want, format!("{id} {}-{}", pair.a, pair.b));
        }
        let interval = dunn_interval(&pairs[0], 3, 0.3).expect("within reach");
        let half = normal::isf(0.05).expect("within reach");
        worst.relative(
            interval.1 - interval.0,
            2.0 * half * pairs[0].std_error,
            "interval",
        );
    }
    worst
}

fn means() -> Worst {
    let mut worst = Worst::new();
    let sleep = data("R_sleep_oneway");
    let two = analysis_of_means(&slices(&sleep), 0.05).expect("not degenerate");
    let p = anova(&slices(&sleep)).expect("not degenerate").test.p;
    worst.relative(two.deviations[0].p_adjusted, p, "two sources");
    let blood = data("dunnett1955_blood_counts");
    let summaries: Vec<_> = blood.iter().map(|g| summarize(g)).collect();
    let three = analysis_of_means_from(&summaries, 0.05).expect("not degenerate");
    assert!(two.exact && !three.exact);
    let modulus = Maximum::modulus(3).expect("within reach");
    let critical = modulus.isf(0.05, 12.0).expect("within reach");
    for d in &three.deviations {
        let want = modulus
            .sf(d.difference.abs() / d.std_error, 12.0)
            .expect("within reach");
        worst.relative(d.p_adjusted, want, format!("three, source {}", d.source));
        worst.relative(d.high - d.low, 2.0 * critical * d.std_error, "interval");
    }
    worst
}

fn rest() -> Worst {
    let mut worst = Worst::new();
    let sleep = data("R_sleep_oneway");
    let p = welch(&slices(&sleep)).expect("not degenerate").p;
    let two = each_against_rest(&slices(&sleep), 0.05).expect("not degenerate");
    // Holm doubles the smaller of two equal p.
    worst.relative(two[0].p_adjusted, 2.0 * p, "two sources");
    worst.relative(
        two[0].difference,
        -two[1].difference,
        "two sources, difference",
    );
    let groups = data("R_PlantGrowth");
    let summaries = brown_forsythe_summaries(&slices(&groups)).expect("not degenerate");
    let by_summary = each_against_rest_from(&summaries, 0.05).expect("not degenerate");
    let by_values = spread_against_rest(&slices(&groups), 0.05).expect("not degenerate");
    for (a, b) in by_summary.iter().zip(&by_values) {
        worst.relative(
            a.p_adjusted,
            b.p_adjusted,
            format!("spread of source {}", a.source),
        );
        let own = &summaries[a.source];
        let others: Vec<_> = (0..3)
            .filter(|j| *j != a.source)
            .map(|j| &summaries[j])
            .collect();
        let want = own.mean - 0.5 * (others[0].mean + others[1].mean);
        worst.record(
            ((a.difference - want) / a.std_error).abs(),
            "difference, in its error",
        );
        let half = t::isf(0.05 / 6.0, a.df).expect("within reach") * a.std_error;
        worst.relative(a.high - a.low, 2.0 * half, "interval");
    }
    worst
}

fn variances() -> Worst {
    let mut worst = Worst::new();
    let sleep = data("R_sleep_oneway");
    let ratio = max_f_ratio(&slices(&sleep)).expect("not degenerate");
    let want = 2.0 * f::sf(ratio.test.statistic, 9.0, 9.0).expect("within reach");
    worst.relative(ratio.test.p, want, "largest over smallest of two");
    let c = cochran_c(&slices(&sleep)).expect("not degenerate");
    worst.relative(
        c.statistic,
        ratio.test.statistic / (1.0 + ratio.test.statistic),
        "C of two",
    );
    // For two sources C and the ratio are one test.
    worst.relative(c.p, want, "C of two, p");
    worst.relative(
        c.p,
        2.0 * beta::sf(c.statistic, 4.5, 4.5).expect("within reach"),
        "C, beta",
    );
    worst
}

fn blocks() -> Worst {
    let mut worst = Worst::new();
    let sleep = data("R_sleep_oneway");
    let mut blocks = Blocks::new(2);
    for (a, b) in sleep[0].iter().zip(&sleep[1]) {
        blocks.push([Some(*a), Some(*b)]);
    }
    let result = blocked_anova(&blocks).expect("not degenerate");
    // R's paired t.test of these data: t = -4.0621, df = 9, p = 0.002833.
    let difference: Vec<f64> = sleep[0].iter().zip(&sleep[1]).map(|(a, b)| a - b).collect();
    let summary = summarize(&difference);
    let t_value = summary.mean / summary.std_error().expect("ten values");
    let p = t::two_sided(t_value, 9.0).expect("within reach");
    worst.relative(result.test.statistic, t_value * t_value, "F is t squared");
    worst.relative(result.test.p, p, "p");
    let pairs = result.tukey().expect("within reach");
    worst.relative(pairs[0].p_adjusted, p, "Tukey of two");
    assert!((t_value + 4.0621).abs() < 5e-5 && (p - 0.002833).abs() < 5e-7);
    worst
}

fn letters() -> Worst {
    let mut worst = Worst::new();
    // Five sources in a row; those at least three apart differ.
    let table = shared_letters(&[0, 1, 2, 3, 4], |a, b| a.abs_diff(b) >= 3);
    let texts: Vec<String> = table.iter().map(|l| letters_text(l)).collect();
    let agree = texts == ["a", "ab", "abc", "bc", "c"];
    worst.record(if agree { 0.5 } else { 2.0 }, format!("{texts:?}"));
    let values = [10.0, 11.0, 9.0, 10.5, 9.5, 30.0];
    let found = median_outliers(&values, 3.5).expect("not degenerate");
    // Median 10.25, MAD 0.75.
    let agree = found.len() == 1 && (found[0].score - 19.75 / (0.75 * 1.4826022185)).abs() < 1e-8;
    worst.record(if agree { 0.5 } else { 2.0 }, format!("{found:?}"));
    worst
}
