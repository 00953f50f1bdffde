//! Whole tests against R, SciPy and statsmodels on the same data.
//!
//! The allowed error is that of the worse of the two: R and SciPy print doubles, but lose digits of
//! their own where sums of squares cancel.

use crate::fixtures::{groups, json, numbers, slices};
use crate::table::{Row, Worst};
use evenrow::stats::{
    Blocks, Degenerate, Test, anderson_darling, anova, bartlett, benjamini_hochberg, blocked_anova,
    bonferroni, brown_forsythe, friedman, hochberg, holm, kruskal_wallis, lag_one, levene_mean,
    ljung_box, mad, median, median_of, shapiro_wilk, sidak, welch,
};
use serde_json::Value;

const LIBRARIES: &str = "R 4.2.2, SciPy 1.17.1, statsmodels 0.15.0";

/// Every entry of both fixture files that has a result of this name: data set, groups, values.
fn each(result: &str, mut visit: impl FnMut(&str, &[Vec<f64>], &[f64])) {
    for file in ["r.json", "python.json"] {
        let fixture = json(file);
        for set in fixture["sets"].as_array().expect("sets") {
            let found = &set["results"][result];
            if *found != Value::Null {
                let name = set["name"].as_str().expect("a name");
                visit(
                    &format!("{file} {name}"),
                    &groups(&set["groups"]),
                    &numbers(found),
                );
            }
        }
    }
}

type Method = fn(&[&[f64]]) -> Result<Test, Degenerate>;

/// Statistic and p of a test on groups; further figures of the fixture are left to others.
fn compare(result: &str, method: Method) -> Worst {
    let mut worst = Worst::new();
    each(result, |name, groups, want| {
        let test = method(&slices(groups)).unwrap_or_else(|e| panic!("{result} {name}: {e}"));
        worst.relative(test.statistic, want[0], format!("{name} statistic"));
        worst.relative(test.p, want[1], format!("{name} p"));
    });
    worst
}

pub fn rows(out: &mut Vec<Row>) {
    let mut push = |statistic, covers, allowed, worst| {
        out.push(Row {
            statistic,
            covers,
            source: LIBRARIES,
            allowed,
            worst,
        });
    };
    let one: Method = |g| anova(g).map(|a| a.test);
    push("one-way ANOVA", &["anova"], 1e-13, compare("anova", one));
    push(
        "Welch",
        &["welch", "welch_from"],
        3e-14,
        compare("welch", welch),
    );
    let covers = &["brown_forsythe", "brown_forsythe_summaries"];
    push(
        "Brown–Forsythe",
        covers,
        1e-13,
        compare("brown_forsythe", brown_forsythe),
    );
    push(
        "Levene about the mean",
        &["levene_mean"],
        1e-13,
        compare("levene_mean", levene_mean),
    );
    push(
        "Bartlett",
        &["bartlett"],
        1e-13,
        compare("bartlett", bartlett),
    );
    push(
        "Kruskal–Wallis",
        &["kruskal_wallis"],
        2e-13,
        compare("kruskal_wallis", kruskal_wallis),
    );
    let [by_r, by_scipy] = shapiro();
    push("Shapiro–Wilk, R", &["shapiro_wilk"], 5e-11, by_r);
    push(
        "Shapiro–Wilk, SciPy (its own accuracy)",
        &["shapiro_wilk"],
        1e-6,
        by_scipy,
    );
    let anderson = compare("anderson_darling", |g| anderson_darling(g[0]));
    push("Anderson–Darling", &["anderson_darling"], 1e-12, anderson);
    push("Ljung–Box", &["ljung_box"], 3e-13, ljung());
    push(
        "Friedman",
        &["friedman"],
        1e-14,
        compare("friedman", |g| friedman(&columns(g))),
    );
    push("lag-one correlation", &["lag_one"], 3e-15, lag());
    push(
        "median and MAD",
        &["mad", "median", "median_of"],
        1e-15,
        medians(),
    );
    push(
        "blocked analysis",
        &["blocked_anova", "difference_variance"],
        1e-13,
        blocked(),
    );
    push(
        "Holm, Hochberg, BH, Šidák, Bonferroni",
        ADJUSTMENTS,
        3e-15,
        adjusted(),
    );
}

/// Against R, which computes in doubles, and SciPy, whose normal scores carry seven digits.
fn shapiro() -> [Worst; 2] {
    let mut worst = [Worst::new(), Worst::new()];
    each("shapiro_wilk", |name, groups, want| {
        let test = shapiro_wilk(&groups[0]).expect("not degenerate");
        let worst = &mut worst[usize::from(name.starts_with("python"))];
        worst.relative(test.statistic, want[0], format!("{name} W"));
        worst.relative(test.p, want[1], format!("{name} p"));
    });
    worst
}

/// One list per source, missing cells NaN.
fn columns(groups: &[&[f64]]) -> Blocks {
    let mut blocks = Blocks::new(groups.len());
    for row in 0..groups[0].len() {
        blocks.push(groups.iter().map(|g| Some(g[row])));
    }
    blocks
}

fn ljung() -> Worst {
    let mut worst = Worst::new();
    each("ljung_box", |name, groups, want| {
        let lags = if name.starts_with("r.json") { 5 } else { 4 };
        let test = ljung_box(&groups[0], lags).expect("not degenerate");
        worst.relative(test.statistic, want[0], format!("{name} statistic"));
        // R forms this p as one minus the lower tail.
        if name.starts_with("python") || want[1] > 0.01 {
            worst.relative(test.p, want[1], format!("{name} p"));
        }
    });
    worst
}

fn lag() -> Worst {
    let mut worst = Worst::new();
    each("lag_one", |name, groups, want| {
        let got = lag_one(&slices(groups)).expect("not degenerate");
        worst.relative(got.phi, want[0], name);
    });
    worst
}

fn medians() -> Worst {
    let mut worst = Worst::new();
    each("mad", |name, groups, want| {
        for (group, want) in groups.iter().zip(want) {
            worst.relative(mad(group), *want, name);
            let mut sorted = group.clone();
            sorted.sort_by(f64::total_cmp);
            let n = sorted.len();
            let middle = 0.5 * (sorted[(n - 1) / 2] + sorted[n / 2]);
            worst.relative(median_of(group), middle, name);
            worst.relative(median(&mut group.clone()), middle, name);
        }
    });
    worst
}

fn blocked() -> Worst {
    let mut worst = Worst::new();
    let fixture = json("r.json");
    for name in ["blocked", "blocked_missing"] {
        let sets = fixture["sets"].as_array().expect("sets");
        let set = sets
            .iter()
            .find(|s| s["name"] == name)
            .expect("the data set");
        let groups = groups(&set["groups"]);
        let result = blocked_anova(&columns(&slices(&groups))).expect("not degenerate");
        let want = numbers(&set["results"]["blocked_anova"]);
        let got = [
            result.test.statistic,
            result.test.p,
            result.ss_sources,
            result.ss_residual,
            result.residual_df,
        ];
        for (i, (got, want)) in got.iter().zip(&want).enumerate() {
            worst.relative(*got, *want, format!("{name} {i}"));
        }
        for (i, want) in numbers(&set["results"]["effects"]).iter().enumerate() {
            worst.relative(result.effects[i], *want, format!("{name} effect {i}"));
        }
        let variance = numbers(&set["results"]["variance_12"])[0];
        let got = result.ms_residual * result.difference_variance(0, 1);
        worst.relative(got, variance, format!("{name} variance"));
    }
    worst
}

const ADJUSTMENTS: &[&str] = &[
    "holm",
    "hochberg",
    "benjamini_hochberg",
    "sidak",
    "bonferroni",
];

fn adjusted() -> Worst {
    let mut worst = Worst::new();
    type Adjust = fn(&[f64]) -> Vec<f64>;
    let methods: [Adjust; 5] = [holm, hochberg, benjamini_hochberg, sidak, bonferroni];
    for (name, method) in ADJUSTMENTS.iter().zip(methods) {
        each(name, |file, groups, want| {
            for (i, (got, want)) in method(&groups[0]).iter().zip(want).enumerate() {
                worst.relative(*got, *want, format!("{file} {name} {i}"));
            }
        });
    }
    worst
}
