//! NIST Statistical Reference Datasets, one-way analysis of variance: all eleven.
//!
//! Two paths. On the data rounded to f64 the results must be those of exact arithmetic on the same
//! doubles, and within half a digit of what that reaches against the certified values. Through an
//! origin subtracted from the decimal text before rounding, at least 14 digits are reached on all.

use crate::fixtures::{number, text};
use crate::table::{Row, Worst};
use evenrow::stats::{anova, anova_from, summarize, summarize_about};

const SETS: [&str; 11] = [
    "AtmWtAg", "SiRstv", "SmLs01", "SmLs02", "SmLs03", "SmLs04", "SmLs05", "SmLs06", "SmLs07",
    "SmLs08", "SmLs09",
];

/// F, between SS, within SS, residual sd.
type Figures = [f64; 4];

struct Set {
    certified: Figures,
    /// Decimal texts by treatment.
    groups: Vec<Vec<String>>,
}

fn load(name: &str) -> Set {
    let text = text(&format!("reference/strd/{name}.dat"));
    let lines: Vec<&str> = text.lines().collect();
    let last = |line: &str| number(line.split_whitespace().last().unwrap_or_default());
    let row = |start: &str| {
        let line = lines[40..47]
            .iter()
            .find(|l| l.starts_with(start))
            .expect("a certified row");
        line.split_whitespace()
            .skip(2)
            .map(number)
            .collect::<Vec<f64>>()
    };
    let (between, within) = (row("Between"), row("Within"));
    let sd = lines[40..52]
        .iter()
        .find(|l| l.contains("Standard Deviation"))
        .expect("residual sd");
    let mut groups: Vec<Vec<String>> = Vec::new();
    for line in &lines[60..] {
        let mut words = line.split_whitespace();
        if let (Some(group), Some(value)) = (words.next(), words.next()) {
            let group = group.parse::<usize>().expect("a treatment number") - 1;
            groups.resize(groups.len().max(group + 1), Vec::new());
            groups[group].push(value.to_owned());
        }
    }
    Set {
        certified: [between[3], between[1], within[1], last(sd)],
        groups,
    }
}

/// A decimal text as an integer of 1e-18 units, exactly.
fn scaled(text: &str) -> i128 {
    let (whole, decimals) = text.split_once('.').unwrap_or((text, ""));
    let digits = format!("{whole}{decimals:0<18}");
    digits.parse().expect("a decimal number")
}

fn figures(groups: &[Vec<f64>]) -> Figures {
    let slices: Vec<&[f64]> = groups.iter().map(Vec::as_slice).collect();
    let a = anova(&slices).expect("the sets are not degenerate");
    [
        a.test.statistic,
        a.ss_between,
        a.ss_within,
        a.ms_within.sqrt(),
    ]
}

/// An unevaluated sum of two doubles: 32 digits, exact for this purpose.
#[derive(Clone, Copy)]
struct Double(f64, f64);

impl Double {
    fn add(self, other: Self) -> Self {
        let sum = self.0 + other.0;
        let part = sum - self.0;
        let rest = (self.0 - (sum - part)) + (other.0 - part) + self.1 + other.1;
        Self(sum + rest, rest - ((sum + rest) - sum))
    }

    fn times(self, other: Self) -> Self {
        let product = self.0 * other.0;
        let rest = self.0.mul_add(other.0, -product) + (self.0 * other.1 + self.1 * other.0);
        Self(product + rest, rest - ((product + rest) - product))
    }

    fn over(self, divisor: f64) -> Self {
        let first = self.0 / divisor;
        let left = self.add(Self(first, 0.0).times(Self(-divisor, 0.0)));
        Self(first, left.0 / divisor)
    }
}

/// The same figures in 32 digits on the same doubles.
fn exact(groups: &[Vec<f64>]) -> Figures {
    let sum = |values: &mut dyn Iterator<Item = Double>| {
        values.fold(Double(0.0, 0.0), |sum, v| sum.add(v))
    };
    let total: usize = groups.iter().map(Vec::len).sum();
    let value = |v: &f64| Double(*v, 0.0);
    let grand = sum(&mut groups.iter().flatten().map(value)).over(total as f64);
    let minus = |a: Double, b: Double| a.add(Double(-b.0, -b.1));
    let (mut between, mut within) = (Double(0.0, 0.0), Double(0.0, 0.0));
    for group in groups {
        let n = group.len() as f64;
        let mean = sum(&mut group.iter().map(value)).over(n);
        let apart = minus(mean, grand);
        between = between.add(apart.times(apart).times(Double(n, 0.0)));
        within = within.add(sum(&mut group.iter().map(|v| {
            let d = minus(value(v), mean);
            d.times(d)
        })));
    }
    let ms_between = between.over((groups.len() - 1) as f64);
    let ms_within = within.over((total - groups.len()) as f64);
    // The quotient and the root of results good to 32 digits round once.
    [
        ms_between.0 / ms_within.0,
        between.0,
        within.0,
        ms_within.0.sqrt(),
    ]
}

/// Correct digits against the certified value; 15 are certified.
fn digits(got: f64, certified: f64) -> f64 {
    (-((got - certified) / certified).abs().log10()).min(15.0)
}

pub fn rows(out: &mut Vec<Row>) {
    let (mut rounded, mut decimal) = (Worst::new(), Worst::new());
    let (mut lost, mut summaries) = (Worst::new(), Worst::new());
    for name in SETS {
        let set = load(name);
        let plain: Vec<Vec<f64>> = set
            .groups
            .iter()
            .map(|g| g.iter().map(|t| number(t)).collect())
            .collect();
        let origin = scaled(&set.groups[0][0]);
        let relative: Vec<Vec<f64>> = set
            .groups
            .iter()
            .map(|g| {
                g.iter()
                    .map(|t| (scaled(t) - origin) as f64 / 1e18)
                    .collect()
            })
            .collect();
        let (ours, best, by_decimal) = (figures(&plain), exact(&plain), figures(&relative));
        for (i, what) in ["F", "between", "within", "sd"].into_iter().enumerate() {
            let at = format!("{name} {what}");
            rounded.relative(ours[i], best[i], &at);
            decimal.relative(by_decimal[i], set.certified[i], &at);
            let missing = digits(best[i], set.certified[i]) - digits(ours[i], set.certified[i]);
            lost.record(missing.max(0.0), &at);
        }
        let about: Vec<_> = plain
            .iter()
            .map(|g| summarize_about(g, plain[0][0]))
            .collect();
        let again = anova_from(&about).expect("not degenerate");
        summaries.relative(again.ss_within, best[2], name);
        summaries.relative(plain.iter().map(|g| summarize(g).ss).sum(), best[2], name);
    }
    assert!(
        lost.error() <= 0.5,
        "more than half a digit lost on the rounded data"
    );
    out.push(Row {
        statistic: "anova on doubles",
        covers: &["anova"],
        source: "NIST StRD, 11 sets: 32-digit arithmetic on the same doubles",
        allowed: 1e-15,
        worst: rounded,
    });
    out.push(Row {
        statistic: "anova on doubles, digits lost of the certified ones",
        covers: &["anova"],
        source: "NIST StRD, 11 sets: certified values (0.5 digit would be allowed)",
        allowed: 5e-6,
        worst: lost,
    });
    out.push(Row {
        statistic: "anova through a decimal origin",
        covers: &["anova"],
        source: "NIST StRD, 11 sets: certified values, 14 digits on all",
        allowed: 1e-14,
        worst: decimal,
    });
    out.push(Row {
        statistic: "summarize, summarize_about, anova_from: sums of squares",
        covers: &["summarize", "summarize_about", "anova_from"],
        source: "NIST StRD, 11 sets: 32-digit arithmetic on the same doubles",
        allowed: 1e-15,
        worst: summaries,
    });
}
