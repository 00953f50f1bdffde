//! Published worked examples, to every printed digit.

use crate::fixtures::{groups, json, slices};
use crate::table::{Row, Worst};
use evenrow::stats::dist::maximum::Maximum;
use evenrow::stats::{
    Side, Test, anderson_darling, anova, bartlett, brown_forsythe, dunnett, dunnett_from,
    games_howell, games_howell_from, generalised_esd, kruskal_wallis, levene_mean, shapiro_wilk,
    summarize, tukey_kramer, tukey_kramer_from, welch,
};

/// The data of one worked example.
pub fn data(id: &str) -> Vec<Vec<f64>> {
    let all = json("reference/worked_examples.json");
    let examples = all["examples"].as_array().expect("examples");
    let example = examples
        .iter()
        .find(|e| e["id"] == id)
        .expect("the example");
    groups(&example["data"])
}

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
    let source = "NIST e-Handbook 1.3.5.4, 1.3.5.7, 1.3.5.10 (GEAR.DAT), printed digits";
    push(
        "gear diameters: ANOVA, Bartlett, Levene, Kruskal–Wallis",
        &[],
        source,
        1.0,
        gear(),
    );
    let source = "R's saved example output, pingouin, Jan and Shieh 2019, printed digits";
    push(
        "ANOVA, Welch, Bartlett, Kruskal–Wallis",
        &[],
        source,
        1.0,
        printed_tests(),
    );
    let covers = &["tukey_kramer", "tukey_kramer_from", "interval"];
    push(
        "Tukey–Kramer",
        covers,
        "NIST e-Handbook 7.4.7.1, printed digits",
        1.0,
        tukey(),
    );
    let covers = &["games_howell", "games_howell_from"];
    push(
        "Games–Howell",
        covers,
        "pingouin 0.7.0 documentation, printed digits",
        1.0,
        games(),
    );
    let covers = &["dunnett", "dunnett_from"];
    let source = "Dunnett 1955 blood counts; multcomp as stored in SciPy, printed digits";
    push("Dunnett", covers, source, 1.0, blood_counts());
    let source = "Dunnett 1955, tables 1a and 1b (one-sided), printed digits";
    push(
        "Dunnett critical values",
        &["maximum::isf"],
        source,
        1.0,
        dunnett_tables(),
    );
    let source = "SciPy tests (AS R94) and nortest, printed digits";
    push(
        "Shapiro–Wilk, Anderson–Darling",
        &[],
        source,
        1.0,
        normality(),
    );
    let covers = &["generalised_esd"];
    let source = "NIST e-Handbook 1.3.5.17.3 (Rosner 1983), printed digits, from memory";
    push("generalised ESD", covers, source, 1.0, rosner());
}

fn test(worst: &mut Worst, name: &str, test: &Test, statistic: &str, p: &str) {
    worst.printed(test.statistic, statistic, format!("{name} statistic"));
    worst.printed(test.p, p, format!("{name} p"));
}

fn gear() -> Worst {
    let groups = data("nist_gear");
    let g = slices(&groups);
    let mut worst = Worst::new();
    let ok = "not degenerate";
    test(
        &mut worst,
        "Levene median",
        &brown_forsythe(&g).expect(ok),
        "1.705917693001",
        "0.0990829755522",
    );
    test(
        &mut worst,
        "Levene mean",
        &levene_mean(&g).expect(ok),
        "2.15945985647",
        "0.032236826559783",
    );
    test(
        &mut worst,
        "Bartlett",
        &bartlett(&g).expect(ok),
        "20.78587342806",
        "0.0136358632781",
    );
    test(
        &mut worst,
        "ANOVA",
        &anova(&g).expect(ok).test,
        "2.2969",
        "0.022661",
    );
    test(
        &mut worst,
        "Kruskal–Wallis",
        &kruskal_wallis(&g).expect(ok),
        "17.03124",
        "0.048229",
    );
    worst
}

fn printed_tests() -> Worst {
    let mut worst = Worst::new();
    let ok = "not degenerate";
    let plants = data("R_PlantGrowth");
    let a = anova(&slices(&plants)).expect(ok);
    test(&mut worst, "PlantGrowth", &a.test, "4.8461", "0.01591");
    worst.printed(a.ss_between, "3.7663", "PlantGrowth between");
    worst.printed(a.ss_within, "10.4921", "PlantGrowth within");
    worst.printed(a.ms_within, "0.3886", "PlantGrowth mean square");
    let chicks = data("R_chickwts");
    let a = anova(&slices(&chicks)).expect(ok);
    test(&mut worst, "chickwts", &a.test, "15.365", "5.936e-10");
    worst.printed(a.ss_between, "231129", "chickwts between");
    let sprays = data("R_InsectSprays");
    test(
        &mut worst,
        "InsectSprays",
        &bartlett(&slices(&sprays)).expect(ok),
        "25.96",
        "9.085e-05",
    );
    worst.printed(
        anova(&slices(&sprays)).expect(ok).test.statistic,
        "34.7",
        "InsectSprays F",
    );
    let sleep = data("R_sleep_oneway");
    test(
        &mut worst,
        "sleep Welch",
        &welch(&slices(&sleep)).expect(ok),
        "3.4626",
        "0.07939",
    );
    test(
        &mut worst,
        "sleep ANOVA",
        &anova(&slices(&sleep)).expect(ok).test,
        "3.4626",
        "0.07919",
    );
    let ozone = data("R_kruskal_airquality");
    test(
        &mut worst,
        "airquality",
        &kruskal_wallis(&slices(&ozone)).expect(ok),
        "29.267",
        "6.901e-06",
    );
    let cilia = data("R_kruskal_hollander_wolfe");
    test(
        &mut worst,
        "mucociliary",
        &kruskal_wallis(&slices(&cilia)).expect(ok),
        "0.77143",
        "0.68",
    );
    let roots: Vec<Vec<f64>> = sprays
        .iter()
        .map(|g| g.iter().map(|v| v.sqrt()).collect())
        .collect();
    let a = anova(&slices(&roots)).expect(ok);
    worst.printed(a.ss_between, "88.44", "InsectSprays, roots, between");
    worst.printed(a.ss_within, "26.06", "InsectSprays, roots, within");
    worst.printed(a.test.statistic, "44.8", "InsectSprays, roots, F");
    let hair = data("pingouin_welch_hair");
    test(
        &mut worst,
        "hair Welch",
        &welch(&slices(&hair)).expect(ok),
        "5.890",
        "0.018813",
    );
    let jan = data("jan_shieh_2019");
    worst.printed(
        anova(&slices(&jan)).expect(ok).test.statistic,
        "0.0926",
        "Jan and Shieh F",
    );
    worst.printed(
        welch(&slices(&jan)).expect(ok).statistic,
        "0.1102",
        "Jan and Shieh Welch",
    );
    worst
}

fn tukey() -> Worst {
    let mut worst = Worst::new();
    let groups = data("nist_prc471_tukey");
    let pairs = tukey_kramer(&slices(&groups)).expect("not degenerate");
    let summaries: Vec<_> = groups.iter().map(|g| summarize(g)).collect();
    let again = tukey_kramer_from(&summaries).expect("not degenerate");
    // Published as i - j; ours is a - b with a < b.
    let published = [
        ((0, 1), ("-4.47", "-0.29")),
        ((0, 2), ("-5.31", "-1.13")),
        ((0, 3), ("-2.25", "1.93")),
        ((1, 2), ("-2.93", "1.25")),
        ((1, 3), ("0.13", "4.31")),
        ((2, 3), ("0.97", "5.15")),
    ];
    for ((pair, other), ((a, b), (low, high))) in pairs.iter().zip(&again).zip(published) {
        assert_eq!((pair.a, pair.b), (a, b));
        let interval = pair.interval(4, 0.05).expect("within reach");
        worst.printed(interval.0, low, format!("{a}-{b} low"));
        worst.printed(interval.1, high, format!("{a}-{b} high"));
        assert!((pair.p_adjusted / other.p_adjusted - 1.0).abs() < 1e-12);
    }
    worst
}

fn games() -> Worst {
    let mut worst = Worst::new();
    let groups = data("pingouin_games_howell_penguins");
    let summaries: Vec<_> = groups.iter().map(|g| summarize(g)).collect();
    let again = games_howell_from(&summaries).expect("not degenerate");
    let published = [
        ("-32.426", "59.706", "152.455", "0.85"),
        ("-1375.354", "58.811", "249.643", "0.00"),
        ("-1342.928", "65.103", "170.404", "0.00"),
    ];
    let pairs = games_howell(&slices(&groups)).expect("not degenerate");
    for ((pair, other), (difference, error, df, p)) in pairs.iter().zip(&again).zip(published) {
        let name = format!("{}-{}", pair.a, pair.b);
        worst.printed(pair.difference, difference, format!("{name} difference"));
        worst.printed(pair.std_error, error, format!("{name} se"));
        worst.printed(pair.df, df, format!("{name} df"));
        worst.printed(pair.p_adjusted, p, format!("{name} p"));
        assert!((pair.p_adjusted - other.p_adjusted).abs() <= 1e-11 * pair.p_adjusted);
    }
    worst
}

fn blood_counts() -> Worst {
    let mut worst = Worst::new();
    let groups = data("dunnett1955_blood_counts");
    let both = dunnett(&slices(&groups), 0, Side::Both, 0.05).expect("not degenerate");
    let summaries: Vec<_> = groups.iter().map(|g| summarize(g)).collect();
    let upper = dunnett_from(&summaries, 0, Side::Upper, 0.05).expect("not degenerate");
    // multcomp integrates by simulation: its p and intervals are good to three figures.
    let published = [
        ("0.85703", "0.6201", "0.3250", "-1.256", "2.556"),
        ("3.69375", "0.00583", "0.00291", "0.840", "4.416"),
    ];
    for ((both, upper), (statistic, two, one, low, high)) in both.iter().zip(&upper).zip(published)
    {
        let name = format!("drug {}", both.source);
        worst.printed(
            both.difference / both.std_error,
            statistic,
            format!("{name} t"),
        );
        worst.printed(
            both.p_adjusted,
            two,
            format!("{name} p {}", both.p_adjusted),
        );
        worst.printed(
            upper.p_adjusted,
            one,
            format!("{name} p above {}", upper.p_adjusted),
        );
        worst.printed(both.low, low, format!("{name} low"));
        worst.printed(both.high, high, format!("{name} high"));
    }
    let cilia = data("R_kruskal_hollander_wolfe");
    let published = [("0.90875", "0.583"), ("-0.05007", "0.998")];
    let both = dunnett(&slices(&cilia), 0, Side::Both, 0.05).expect("not degenerate");
    for (one, (statistic, p)) in both.iter().zip(published) {
        worst.printed(one.difference / one.std_error, statistic, "mucociliary t");
        worst.printed(one.p_adjusted, p, "mucociliary p");
    }
    worst
}

/// The printed 2.33 for p 5, df 30 is left out: the exact value, 2.3352, rounds to 2.34.
fn dunnett_tables() -> Worst {
    let mut worst = Worst::new();
    let table = [
        (1, 10.0, "1.81", 0.05),
        (3, 10.0, "2.34", 0.05),
        (2, 30.0, "1.99", 0.05),
        (4, 12.0, "3.32", 0.01),
        (7, 12.0, "3.56", 0.01),
        (2, 60.0, "2.64", 0.01),
        (4, 60.0, "2.87", 0.01),
    ];
    for (p, df, critical, alpha) in table {
        let maximum = Maximum::dunnett(7, &vec![7; p], Side::Upper).expect("within reach");
        let got = maximum.isf(alpha, df).expect("within reach");
        worst.printed(got, critical, format!("p {p}, df {df}"));
    }
    worst
}

fn normality() -> Worst {
    let mut worst = Worst::new();
    let samples = data("shapiro_wilk_scipy");
    let ok = "not degenerate";
    test(
        &mut worst,
        "x1",
        &shapiro_wilk(&samples[0]).expect(ok),
        "0.90047",
        "0.04209",
    );
    test(
        &mut worst,
        "x2",
        &shapiro_wilk(&samples[1]).expect(ok),
        "0.959027",
        "0.5246",
    );
    let constant = data("anderson_darling_normal_constant");
    let a = anderson_darling(&constant[0]).expect(ok);
    worst.printed(a.statistic, "3.208057", "A2");
    worst
}

const ROSNER: [f64; 54] = [
    -0.25, 0.68, 0.94, 1.15, 1.20, 1.26, 1.26, 1.34, 1.38, 1.43, 1.49, 1.49, 1.55, 1.56, 1.58,
    1.65, 1.69, 1.70, 1.76, 1.77, 1.81, 1.91, 1.94, 1.96, 1.99, 2.06, 2.09, 2.10, 2.14, 2.15, 2.23,
    2.24, 2.26, 2.35, 2.37, 2.40, 2.47, 2.54, 2.62, 2.64, 2.90, 2.92, 2.92, 2.93, 3.21, 3.26, 3.30,
    3.59, 3.68, 4.30, 4.64, 5.34, 5.42, 6.01,
];

fn rosner() -> Worst {
    let mut worst = Worst::new();
    let esd = generalised_esd(&ROSNER, 10, 0.05).expect("not degenerate");
    let published = [
        ("3.118", "3.158"),
        ("2.942", "3.151"),
        ("3.179", "3.143"),
        ("2.810", "3.136"),
        ("2.815", "3.128"),
        ("2.848", "3.120"),
        ("2.279", "3.111"),
        ("2.310", "3.103"),
        ("2.101", "3.094"),
        ("2.067", "3.085"),
    ];
    for (i, (step, (statistic, critical))) in esd.steps.iter().zip(published).enumerate() {
        // The handbook cuts its figures off after three decimals instead of rounding them.
        worst.printed(step.statistic - 0.0005, statistic, format!("R{}", i + 1));
        worst.printed(
            step.critical - 0.0005,
            critical,
            format!("lambda {}", i + 1),
        );
    }
    assert_eq!((esd.steps.len(), esd.outliers), (10, 3));
    worst
}
