//! Power and sample size, and statistics that are checked by an identity of their own.

use crate::fixtures::{json, numbers};
use crate::table::{Row, Worst};
use evenrow::stats::dist::{f, noncentral_f, t};
use evenrow::stats::{
    Summary, anova_power, effective_sample_size, lag_one, naming_power, smallest_deviation,
    smallest_n, summarize, ties, von_neumann_ratio, welch_power,
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
    let source = "statsmodels FTestAnovaPower";
    push(
        "power of ANOVA",
        &["anova_power"],
        source,
        1e-14,
        power("python.json"),
    );
    let source = "R power.anova.test (its own accuracy)";
    push(
        "power of ANOVA",
        &["anova_power"],
        source,
        5e-8,
        power("r.json"),
    );
    let source = "noncentral F at the quantile; equal spreads make Welch's noncentrality ANOVA's";
    push(
        "power of Welch and of naming",
        &["welch_power", "naming_power"],
        source,
        1e-14,
        others(),
    );
    let covers = &["smallest_n", "smallest_deviation"];
    push(
        "n and deviation for a power",
        covers,
        "inverse of the power",
        1e-10,
        inverse(),
    );
    let covers = &["variance", "sd", "std_error", "merge"];
    push(
        "summary figures",
        covers,
        "definitions, in 32 digits by hand",
        1e-15,
        summary(),
    );
    let covers = &[
        "von_neumann_ratio",
        "effective_sample_size",
        "bias_corrected",
        "ties",
    ];
    push(
        "dependence and ties",
        covers,
        "definitions, by hand",
        1e-15,
        dependence(),
    );
}

const DEVIATIONS: [f64; 4] = [0.0, 0.0, 0.0, 0.8];

fn power(file: &str) -> Worst {
    let mut worst = Worst::new();
    let fixture = json(file);
    let sets = fixture["sets"].as_array().expect("sets");
    let set = sets
        .iter()
        .find(|s| s["name"] == "power")
        .expect("the power set");
    for (n, want) in [5, 20, 100]
        .into_iter()
        .zip(numbers(&set["results"]["anova_power"]))
    {
        let got = anova_power(&DEVIATIONS, n, 1.0, 0.01).expect("within reach");
        worst.relative(got, want, format!("n {n}"));
    }
    worst
}

fn others() -> Worst {
    let mut worst = Worst::new();
    for n in [6_usize, 25] {
        // Equal counts and sds: lambda is ANOVA's, the df are Welch's at equal variances.
        let sources = DEVIATIONS.map(|mean| Summary {
            n,
            mean,
            ss: (n - 1) as f64,
        });
        let got = welch_power(&sources, 0.01).expect("within reach");
        let df2 = 15.0 / (3.0 * 4.0 * 0.75_f64.powi(2) / (n - 1) as f64);
        let critical = f::isf(0.01, 3.0, df2).expect("within reach");
        let lambda = n as f64 * 0.64 * 0.75;
        let want = noncentral_f::sf(critical, 3.0, df2, lambda).expect("within reach");
        worst.relative(got, want, format!("Welch n {n}"));
        // A contrast of 1 against 3, each of n, at alpha / 4.
        let df = (4 * (n - 1)) as f64;
        let critical = t::isf(0.01 / 8.0, df).expect("within reach").powi(2);
        let want = noncentral_f::sf(critical, 1.0, df, lambda).expect("within reach");
        let got = naming_power(0.8, 4, n, 1.0, 0.01).expect("within reach");
        worst.relative(got, want, format!("naming n {n}"));
    }
    worst
}

fn inverse() -> Worst {
    let mut worst = Worst::new();
    let at = |n: usize| anova_power(&DEVIATIONS, n, 1.0, 0.01);
    let n = smallest_n(0.9, 10_000, at)
        .expect("within reach")
        .expect("enough");
    let brackets = at(n).expect("power") >= 0.9 && at(n - 1).expect("power") < 0.9;
    worst.record(if brackets { 0.0 } else { 1.0 }, format!("n {n}"));
    let found = |d: f64| naming_power(d, 12, 160, 1.0, 1e-5);
    let d = smallest_deviation(0.9, found)
        .expect("within reach")
        .expect("enough");
    worst.relative(found(d).expect("power"), 0.9, format!("deviation {d}"));
    worst
}

fn summary() -> Worst {
    let mut worst = Worst::new();
    // 2, 4, 4, 4, 5, 5, 7, 9: mean 5, ss 32.
    let (a, b) = (
        summarize(&[2.0, 4.0, 4.0]),
        summarize(&[4.0, 5.0, 5.0, 7.0, 9.0]),
    );
    let all = a.merge(&b);
    worst.relative(all.mean, 5.0, "mean");
    worst.relative(all.ss, 32.0, "ss");
    worst.relative(all.variance().expect("n >= 2"), 32.0 / 7.0, "variance");
    worst.relative(all.sd().expect("n >= 2"), (32.0_f64 / 7.0).sqrt(), "sd");
    worst.relative(
        all.std_error().expect("n >= 2"),
        (4.0_f64 / 7.0).sqrt(),
        "standard error",
    );
    worst
}

fn dependence() -> Worst {
    let mut worst = Worst::new();
    // Mean 3, deviations -2, -1, 0, 1, 2: ss 10, successive differences 1.
    let ramp = [1.0, 2.0, 3.0, 4.0, 5.0];
    let ratio = von_neumann_ratio(&ramp).expect("not degenerate");
    worst.relative(ratio.statistic, 0.4, "von Neumann");
    let z = 0.8 / (3.0_f64 / 24.0).sqrt();
    worst.relative(
        ratio.p,
        evenrow::stats::dist::normal::sf(z),
        "von Neumann p",
    );
    let lag = lag_one(&[&ramp, &ramp]).expect("not degenerate");
    // Products 2, 0, 0, 2 over 10.
    worst.relative(lag.phi, 0.4, "phi");
    worst.relative(
        lag.bias_corrected(),
        3.0 / 2.0_f64.max(0.0) / 1.5,
        "phi, corrected and clamped",
    );
    worst.relative(lag.std_error, (0.84_f64 / 8.0).sqrt(), "standard error");
    worst.relative(effective_sample_size(90, 0.5), 30.0, "effective n");
    worst.relative(
        effective_sample_size(90, -0.5),
        90.0,
        "effective n, negative phi",
    );
    let coarse = ties(&[1.0, 2.0, 2.0, 5.0], Some(0.5)).expect("not degenerate");
    worst.relative(coarse.share, 0.5, "share of ties");
    worst.relative(
        coarse.resolution_sds.expect("it varies"),
        0.5 / 3.0_f64.sqrt(),
        "resolution",
    );
    worst
}
