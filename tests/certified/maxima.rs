//! Studentized range, Dunnett, analysis of means, maximum F ratio.

use crate::fixtures::{cells, number};
use crate::table::{Row, Worst};
use evenrow::stats::dist::maximum::{Maximum, Side, shared_means};
use evenrow::stats::dist::{maximum_f_ratio, studentized_range, t};
use std::collections::BTreeMap;

pub fn rows(out: &mut Vec<Row>) {
    studentized(out);
    dunnett_equal(out);
    dunnett_unequal(out);
    means(out);
    modulus(out);
    f_ratio(out);
}

fn studentized(out: &mut Vec<Row>) {
    let (mut tails, mut quantiles, mut off) = (Worst::new(), Worst::new(), Worst::new());
    for row in cells("reference/tukey_tail_reference.csv", 1, ',') {
        let (k, df) = (number(&row[0]) as usize, number(&row[1]));
        let (q, want) = (number(&row[3]), number(&row[4]));
        let at = format!("k {k}, df {df}, tail {}", row[2]);
        tails.relative(
            studentized_range::sf(q, k, df).expect("within reach"),
            want,
            &at,
        );
        quantiles.relative(
            studentized_range::isf(want, k, df).expect("within reach"),
            q,
            &at,
        );
    }
    for row in cells("precise.csv", 0, ',')
        .iter()
        .filter(|r| r[0] == "studentized_range")
    {
        let a: Vec<f64> = row[1].split(' ').map(number).collect();
        let table = studentized_range::table(a[1] as usize).expect("within reach");
        off.relative(
            table.sf(a[0], a[2]).expect("within reach"),
            number(&row[2]),
            &row[1],
        );
    }
    out.push(Row {
        statistic: "studentized range upper tail",
        covers: &["studentized_range::sf"],
        source: "200-bit ball arithmetic, 294 rows, 0.5 to 1e-12, k to 200, df 2 to infinity",
        allowed: 1e-13,
        worst: tails,
    });
    out.push(Row {
        statistic: "studentized range upper tail off the rows",
        covers: &["studentized_range::sf", "studentized_range::table"],
        source: "python-flint, k 3 to 200, df 1 to 1e6, q from 0.02",
        allowed: 1e-13,
        worst: off,
    });
    out.push(Row {
        statistic: "studentized range quantile",
        covers: &["studentized_range::isf"],
        source: "the same 294 rows, inverted",
        allowed: 3e-14,
        worst: quantiles,
    });
}

fn dunnett_equal(out: &mut Vec<Row>) {
    let mut worst = Worst::new();
    let mut built = BTreeMap::new();
    for row in cells("reference/dunnett_equal_n_tail_reference.csv", 1, ',') {
        let p = number(&row[0]) as usize;
        let maximum = built.entry(p).or_insert_with(|| {
            Maximum::dunnett(10, &vec![10; p], Side::Both).expect("within reach")
        });
        let got = maximum
            .sf(number(&row[3]), number(&row[1]))
            .expect("within reach");
        worst.relative(
            got,
            number(&row[4]),
            format!("p {p}, df {}, tail {}", row[1], row[2]),
        );
    }
    out.push(Row {
        statistic: "Dunnett upper tail, equal counts",
        covers: &["maximum::dunnett", "maximum::sf"],
        source: "200-bit ball arithmetic, 252 rows",
        allowed: 3e-13,
        worst,
    });
}

fn dunnett_unequal(out: &mut Vec<Row>) {
    let (mut worst, mut back) = (Worst::new(), Worst::new());
    let mut built = BTreeMap::new();
    for row in cells("reference/dunnett_unequal_n_tail_reference.csv", 1, ',') {
        let want = number(&row[7]);
        if want.is_nan() {
            // The two-sided rows of one configuration have no reference; precise.csv covers it.
            assert_eq!((row[0].as_str(), row[4].as_str()), ("C", "two-sided"));
            continue;
        }
        let side = if row[4] == "greater" {
            Side::Upper
        } else {
            Side::Both
        };
        let counts: Vec<usize> = row[2].split(' ').map(|n| number(n) as usize).collect();
        let maximum = built
            .entry((row[0].clone(), row[4].clone()))
            .or_insert_with(|| {
                Maximum::dunnett(number(&row[1]) as usize, &counts, side).expect("within reach")
            });
        let (q, df) = (number(&row[6]), number(&row[3]));
        let at = format!("{} {} tail {}", row[0], row[4], row[5]);
        worst.relative(maximum.sf(q, df).expect("within reach"), want, &at);
        back.relative(maximum.isf(want, df).expect("within reach"), q, &at);
    }
    for row in cells("precise.csv", 0, ',')
        .iter()
        .filter(|r| r[0] == "dunnett")
    {
        let a: Vec<&str> = row[1].split(' ').collect();
        let side = if a[3] == "upper" {
            Side::Upper
        } else {
            Side::Both
        };
        let counts: Vec<usize> = a[2].split('/').map(|n| number(n) as usize).collect();
        let maximum = Maximum::dunnett(number(a[1]) as usize, &counts, side).expect("within reach");
        let got = maximum
            .sf(number(a[0]), number(a[4]))
            .expect("within reach");
        worst.relative(got, number(&row[2]), &row[1]);
    }
    out.push(Row {
        statistic: "Dunnett upper tail, unequal counts, one- and two-sided",
        covers: &["maximum::dunnett", "maximum::sf"],
        source: "ball arithmetic and python-flint, 51 rows",
        allowed: 1e-13,
        worst,
    });
    out.push(Row {
        statistic: "Dunnett quantile",
        covers: &["maximum::isf"],
        source: "the same rows, inverted",
        allowed: 1e-14,
        worst: back,
    });
}

fn means(out: &mut Vec<Row>) {
    let (mut tails, mut coarse, mut critical) = (Worst::new(), Worst::new(), Worst::new());
    let mut built = BTreeMap::new();
    for row in cells("reference/anom_tail_reference.csv", 1, ',') {
        let k = number(&row[0]) as usize;
        let maximum = built
            .entry(k)
            .or_insert_with(|| shared_means(k).expect("within reach"));
        let got = maximum
            .sf(number(&row[3]), number(&row[1]))
            .expect("within reach");
        // Rows whose own discretisation check is worse than 1e-12 are good to that check only.
        let worst = if number(&row[5]) > 1e-12 {
            &mut coarse
        } else {
            &mut tails
        };
        worst.relative(
            got,
            number(&row[4]),
            format!("k {k}, df {}, tail {}", row[1], row[2]),
        );
    }
    for row in cells("reference/anom_reference.csv", 1, ',') {
        let k = number(&row[0]) as usize;
        let got = built[&k]
            .isf(number(&row[2]), number(&row[1]))
            .expect("within reach");
        if number(&row[4]) < 1e-12 {
            critical.relative(
                got,
                number(&row[3]),
                format!("k {k}, df {}, {}", row[1], row[2]),
            );
        }
    }
    let mut push = |statistic, covers, source, allowed, worst| {
        out.push(Row {
            statistic,
            covers,
            source,
            allowed,
            worst,
        });
    };
    push(
        "analysis of means upper tail",
        &["maximum::means", "maximum::shared_means"],
        "quadrature, equal counts",
        3e-13,
        tails,
    );
    push(
        "analysis of means upper tail, df 120",
        &["maximum::means"],
        "quadrature; the reference is good to 1e-8",
        1e-13,
        coarse,
    );
    push(
        "analysis of means critical values",
        &["maximum::isf"],
        "quadrature",
        5e-15,
        critical,
    );
}

fn modulus(out: &mut Vec<Row>) {
    let mut worst = Worst::new();
    // With one variable it is |t|; with infinite df, one minus a power.
    let one = Maximum::modulus(1).expect("within reach");
    let many = Maximum::modulus(12).expect("within reach");
    for (x, df) in [(0.4, 3.0), (2.2, 11.0), (5.0, 60.0), (9.0, 1000.0)] {
        let want = t::two_sided(x, df).expect("within reach");
        worst.relative(
            one.sf(x, df).expect("within reach"),
            want,
            format!("1 of {x}, {df}"),
        );
        let p = t::two_sided(x, f64::INFINITY).expect("within reach");
        let got = many.sf(x, f64::INFINITY).expect("within reach");
        worst.relative(got, -(12.0 * (-p).ln_1p()).exp_m1(), format!("12 of {x}"));
    }
    out.push(Row {
        statistic: "maximum modulus upper tail",
        covers: &["maximum::modulus"],
        source: "Student's t for one variable, closed form for infinite df",
        allowed: 3e-14,
        worst,
    });
}

fn f_ratio(out: &mut Vec<Row>) {
    let (mut worst, mut back, mut printed) = (Worst::new(), Worst::new(), Worst::new());
    for row in cells("precise.csv", 0, ',')
        .iter()
        .filter(|r| r[0] == "maximum_f_ratio")
    {
        let (ratio, dfs) = row[1].split_once(' ').expect("ratio and df");
        let dfs: Vec<f64> = dfs.split('/').map(number).collect();
        let want = number(&row[2]);
        let got = maximum_f_ratio::sf(number(ratio), &dfs).expect("within reach");
        worst.relative(got, want, &row[1]);
        if want < 0.999 && want > 1e-250 {
            let got = maximum_f_ratio::isf(want, &dfs).expect("within reach");
            back.relative(got, number(ratio), &row[1]);
        }
    }
    // Pearson and Hartley, Biometrika Tables I (1966), table 31, from memory.
    for (k, df, alpha, table) in [
        (2, 10.0, 0.05, "3.72"),
        (3, 10.0, 0.05, "4.85"),
        (3, 5.0, 0.05, "10.8"),
    ] {
        let got = maximum_f_ratio::isf(alpha, &vec![df; k]).expect("within reach");
        printed.printed(got, table, format!("k {k}, df {df}"));
    }
    out.push(Row {
        statistic: "maximum F ratio upper tail",
        covers: &["maximum_f_ratio::sf"],
        source: "mpmath, equal and unequal df",
        allowed: 1e-13,
        worst,
    });
    out.push(Row {
        statistic: "maximum F ratio quantile",
        covers: &["maximum_f_ratio::isf"],
        source: "the same rows, inverted",
        allowed: 1e-13,
        worst: back,
    });
    out.push(Row {
        statistic: "maximum F ratio critical values, printed digits",
        covers: &["maximum_f_ratio::isf"],
        source: "Biometrika Tables I, table 31, from memory",
        allowed: 1.0,
        worst: printed,
    });
}
