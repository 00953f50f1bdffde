//! Tails and quantiles of the elementary distributions, down to 1e-100.

use crate::fixtures::{cells, number};
use crate::table::{Row, Worst};
use evenrow::stats::dist::{beta, chi_square, f, noncentral_f, normal, t};

pub fn rows(out: &mut Vec<Row>) {
    upper_tails(out);
    quantiles(out);
    there_and_back(out);
    noncentral(out);
    lower_complements(out);
    other_crate(out);
}

/// Lower tails that are defined as complements: absolutely.
fn lower_complements(out: &mut Vec<Row>) {
    use evenrow::stats::dist::maximum::Maximum;
    use evenrow::stats::dist::{maximum_f_ratio, studentized_range};
    let mut worst = Worst::new();
    let one = Maximum::modulus(1).expect("within reach");
    for (x, df) in [(0.5, 3.0), (1.7, 12.0), (4.0, 200.0)] {
        // Two means, one variable, two variances: Student's t and F.
        let inside = 1.0 - t::two_sided(x, df).expect("within reach");
        let q = studentized_range::cdf(x * 2.0_f64.sqrt(), 2, df).expect("within reach");
        worst.record((q - inside).abs(), format!("range {x}"));
        worst.record(
            (one.cdf(x, df).expect("within reach") - inside).abs(),
            format!("modulus {x}"),
        );
        let ratio = maximum_f_ratio::cdf(1.0 + x, &[df, df]).expect("within reach");
        let want = 1.0 - 2.0 * f::sf(1.0 + x, df, df).expect("within reach");
        worst.record((ratio - want).abs(), format!("ratio {x}"));
    }
    out.push(Row {
        statistic: "lower tails of studentized range, maximum, variance ratio (absolute)",
        covers: &[
            "studentized_range::cdf",
            "maximum::cdf",
            "maximum_f_ratio::cdf",
        ],
        source: "Student's t and F for two sources",
        allowed: 5e-15,
        worst,
    });
}

/// Where the general-purpose crate keeps its digits, near the middle, ours agree with it.
fn other_crate(out: &mut Vec<Row>) {
    use statrs::distribution::{ChiSquared, ContinuousCDF, FisherSnedecor, StudentsT};
    let mut worst = Worst::new();
    for (df, x) in [(3.0, 2.0), (12.0, 9.0), (40.0, 50.0)] {
        let chi = ChiSquared::new(df).expect("valid").sf(x);
        worst.relative(
            chi_square::sf(x, df).expect("within reach"),
            chi,
            format!("chi-square {df}"),
        );
        let student = StudentsT::new(0.0, 1.0, df).expect("valid").sf(x / df);
        worst.relative(
            t::sf(x / df, df).expect("within reach"),
            student,
            format!("t {df}"),
        );
        let fisher = FisherSnedecor::new(4.0, df).expect("valid").sf(x / df);
        worst.relative(
            f::sf(x / df, 4.0, df).expect("within reach"),
            fisher,
            format!("F {df}"),
        );
    }
    out.push(Row {
        statistic: "chi-square, t and F upper tails near the middle",
        covers: &[],
        source: "statrs 0.19",
        allowed: 1e-13,
        worst,
    });
}

fn upper_tails(out: &mut Vec<Row>) {
    let mut worst: [Worst; 5] = std::array::from_fn(|_| Worst::new());
    for row in cells("reference/upper_tail_cases.tsv", 0, '\t') {
        let [a, b, x, want] = [1, 2, 3, 5].map(|i| number(&row[i]));
        let got = match row[0].as_str() {
            "normal" => Ok(normal::sf(x)),
            "chi2" => chi_square::sf(x, a),
            "t" => t::sf(x, a),
            "F" => f::sf(x, a, b),
            "beta" => beta::sf(x, a, b),
            other => panic!("unknown distribution {other}"),
        };
        let at = format!("{} {a} {b} {x:e}", row[0]);
        worst[place(&row[0])].relative(got.expect("within reach"), want, at);
    }
    let [normal, chi, t, f, beta] = worst;
    let mut push = |statistic, covers, allowed, worst| {
        out.push(Row {
            statistic,
            covers,
            source: "400-bit ball arithmetic, to 1e-100",
            allowed,
            worst,
        });
    };
    push("normal upper tail", &["normal::sf"], 1e-15, normal);
    push("chi-square upper tail", &["chi_square::sf"], 1e-13, chi);
    push("t upper tail", &["t::sf"], 1e-13, t);
    push("F upper tail", &["f::sf"], 1e-13, f);
    push("beta upper tail", &["beta::sf"], 1e-13, beta);
}

fn place(name: &str) -> usize {
    ["normal", "chi2", "t", "F", "beta"]
        .iter()
        .position(|n| *n == name)
        .expect("a known name")
}

/// Rows whose reference is missing (`nan`): named, so that no further one goes unnoticed.
const WITHOUT_REFERENCE: [(&str, f64); 4] = [
    ("chi2", 1e-30),
    ("chi2", 1e-12),
    ("chi2", 1e-6),
    ("chi2", 0.01),
];

fn quantiles(out: &mut Vec<Row>) {
    let mut worst: [Worst; 5] = std::array::from_fn(|_| Worst::new());
    for row in cells("reference/quantile_cases.tsv", 0, '\t') {
        let [a, b, p, want] = [1, 2, 3, 4].map(|i| number(&row[i]));
        if want.is_nan() {
            assert!(
                a == 1000.0 && WITHOUT_REFERENCE.contains(&(row[0].as_str(), p)),
                "{row:?}"
            );
            continue;
        }
        // p is a lower tail; above one half 1 - p is exact, and isf takes it.
        let upper = p > 0.5;
        let q = if upper { 1.0 - p } else { p };
        let got = match (row[0].as_str(), upper) {
            ("normal", false) => normal::quantile(q),
            ("normal", true) => normal::isf(q),
            ("chi2", false) => chi_square::quantile(q, a),
            ("chi2", true) => chi_square::isf(q, a),
            ("t", false) => t::quantile(q, a),
            ("t", true) => t::isf(q, a),
            ("F", false) => f::quantile(q, a, b),
            ("F", true) => f::isf(q, a, b),
            ("beta", false) => beta::quantile(q, a, b),
            ("beta", true) => beta::isf(q, a, b),
            (other, _) => panic!("unknown distribution {other}"),
        };
        let at = format!("{} {a} {b} {p:e}", row[0]);
        worst[place(&row[0])].relative(got.expect("within reach"), want, at);
    }
    let [normal, chi, t, f, beta] = worst;
    let mut push = |statistic, covers, allowed, worst| {
        out.push(Row {
            statistic,
            covers,
            source: "400-bit ball arithmetic, p from 1e-100",
            allowed,
            worst,
        });
    };
    push(
        "normal quantile",
        &["normal::isf", "normal::quantile"],
        1e-15,
        normal,
    );
    push(
        "chi-square quantile",
        &["chi_square::isf", "chi_square::quantile"],
        1e-13,
        chi,
    );
    push("t quantile", &["t::isf", "t::quantile"], 3e-14, t);
    push("F quantile", &["f::isf", "f::quantile"], 1e-13, f);
    push(
        "beta quantile",
        &["beta::isf", "beta::quantile"],
        3e-14,
        beta,
    );
}

/// Lower tails at the quantiles of the reference, and identities that tie the rest to them.
fn there_and_back(out: &mut Vec<Row>) {
    let (mut worst, mut identities) = (Worst::new(), Worst::new());
    for row in cells("reference/quantile_cases.tsv", 0, '\t') {
        let [a, b, p, x] = [1, 2, 3, 4].map(|i| number(&row[i]));
        if x.is_nan() || p > 0.5 {
            continue;
        }
        let (got, slope) = match row[0].as_str() {
            "normal" => (Ok(normal::cdf(x)), x * x),
            "chi2" => (chi_square::cdf(x, a), a),
            "t" => (t::cdf(x, a), a.min(x * x)),
            "F" => (f::cdf(x, a, b), a),
            _ => (beta::cdf(x, a, b), a),
        };
        // The reference is rounded to a double: its half unit moves p by up to the slope in ln x.
        let error = ((got.expect("within reach") - p) / p).abs() / (1.0 + slope);
        worst.record(error, format!("{} {a} {b} {p:e}", row[0]));
    }
    for (x, df) in [(0.3, 2.0), (2.5, 7.5), (9.0, 40.0), (31.0, 1e5)] {
        let one = t::sf(x, df).expect("within reach");
        identities.relative(t::two_sided(x, df).expect("within reach"), 2.0 * one, x);
        identities.relative(f::sf(x * x, 1.0, df).expect("within reach"), 2.0 * one, x);
    }
    for z in [-3.0_f64, 0.0, 0.7, 4.0] {
        let exact = (-0.5 * z * z).exp() / (2.0 * std::f64::consts::PI).sqrt();
        identities.relative(normal::pdf(z), exact, z);
        identities.relative(normal::cdf(z), normal::sf(-z), z);
    }
    out.push(Row {
        statistic: "lower tails of normal, chi-square, t, F, beta, per unit of ln x",
        covers: &[
            "normal::cdf",
            "chi_square::cdf",
            "t::cdf",
            "f::cdf",
            "beta::cdf",
        ],
        source: "400-bit quantiles inverted",
        allowed: 3e-14,
        worst,
    });
    out.push(Row {
        statistic: "t two-sided, t and F, normal density",
        covers: &["t::two_sided", "normal::pdf"],
        source: "identities: F(1, df) = t(df)^2, symmetry, closed form",
        allowed: 1e-15,
        worst: identities,
    });
}

fn noncentral(out: &mut Vec<Row>) {
    let (mut upper, mut lower, mut back) = (Worst::new(), Worst::new(), Worst::new());
    for row in cells("precise.csv", 0, ',')
        .iter()
        .filter(|r| r[0] == "noncentral_f")
    {
        let a: Vec<f64> = row[1].split(' ').map(number).collect();
        let want = number(&row[2]);
        let got = noncentral_f::sf(a[0], a[1], a[2], a[3]).expect("within reach");
        upper.relative(got, want, &row[1]);
        let below = noncentral_f::cdf(a[0], a[1], a[2], a[3]).expect("within reach");
        if want < 0.999 {
            let value = noncentral_f::isf(want, a[1], a[2], a[3]).expect("within reach");
            back.relative(value, a[0], &row[1]);
        }
        if want < 0.9 {
            lower.relative(below, 1.0 - want, &row[1]);
        }
    }
    out.push(Row {
        statistic: "noncentral F upper tail",
        covers: &["noncentral_f::sf"],
        source: "mpmath, 40 digits",
        allowed: 4e-13,
        worst: upper,
    });
    out.push(Row {
        statistic: "noncentral F lower tail",
        covers: &["noncentral_f::cdf"],
        source: "mpmath, 40 digits",
        allowed: 1e-13,
        worst: lower,
    });
    out.push(Row {
        statistic: "noncentral F quantile",
        covers: &["noncentral_f::isf"],
        source: "the same rows, inverted",
        allowed: 5e-14,
        worst: back,
    });
}
