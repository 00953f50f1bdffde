//! How rarely anything is called when nothing is wrong, and that the harness itself measures right.

use evenrow::model::Pairing;

use super::super::feed::{Noise, Setup};
use super::super::measure::{Change, Measure};
use super::super::rig::Start;
use super::super::table::Bound::{self, Anything, AtLeast, AtMost, Within};
use super::super::table::{Asked, Form, Row};
use super::{GLR_OF_12_AT_50_000, NO_SPREAD_MARGIN, asked};

pub fn published(rows: &mut Vec<Row>) {
    let table = [
        (4.0, [167.7, 26.6, 8.38, 3.34]),
        (5.0, [465.4, 38.0, 10.4, 4.01]),
    ];
    for (h, arls) in table {
        for (shift, arl) in [0.0, 0.5, 1.0, 2.0].into_iter().zip(arls) {
            rows.push(Row {
                what: "two-sided CUSUM, k 0.5 (published): the harness itself",
                case: format!("h {h}, {shift} sd"),
                measure: Measure::Published { h, shift, arl },
                runs: [4000, 40_000],
                asked: vec![asked(
                    "mean run length / published",
                    Within(0.94, 1.06),
                    Within(0.98, 1.02),
                    Within(0.985, 1.015),
                )],
            });
        }
    }
}

/// What is asked of false calls: of all together; level and spread by themselves are told.
fn realised([short, solid, aim]: [Bound; 3]) -> Vec<Asked> {
    vec![
        asked("realised / nominal ARL0", short, solid, aim),
        asked("of level, of its share", Anything, Anything, Anything),
        asked("of spread, of its share", Anything, Anything, Anything),
    ]
}

/// A row of realised over nominal cycles to a false call, from learnt states.
fn rate(what: &'static str, case: String, mut setup: Setup, form: Form, bounds: [Bound; 3]) -> Row {
    setup.arl0 = match form {
        Form::Short => 2000.0,
        Form::Full => 5000.0,
    };
    let most = (2.0 * setup.arl0) as i64;
    // Large banks and correlated noise call for more of a short test than they bring.
    let heavy = setup.k > 12;
    let [short, solid, aim] = bounds;
    Row {
        what,
        case,
        measure: Measure::FalseCalls {
            setup,
            start: Start::Learnt(12),
            most,
        },
        runs: [if heavy { 40 } else { 90 }, 1200],
        asked: realised([short, solid, aim]),
    }
}

pub fn rates(form: Form, rows: &mut Vec<Row>) {
    let even = |k: usize| Setup {
        spread_margin: NO_SPREAD_MARGIN,
        ..Setup::even(k)
    };
    let normal = [Within(0.6, 2.8), Within(0.8, 1.25), Within(0.9, 1.1)];
    for k in [2, 3, 4, 12, 60] {
        rows.push(rate(
            "no change: ARL0",
            format!("normal, k {k}"),
            even(k),
            form,
            normal,
        ));
    }
    let shapes = [Within(0.5, 4.5), Within(0.75, 3.0), Within(0.8, 1.5)];
    for (name, noise, resolution) in [
        ("t with 3 df", Noise::T3, 0.0),
        ("lognormal", Noise::Lognormal, 0.0),
        ("1 % outliers at 10 sd", Noise::Outliers(0.01), 0.0),
        ("rounded to half a sd", Noise::Normal, 0.5),
    ] {
        let setup = Setup {
            noise,
            resolution,
            ..even(12)
        };
        rows.push(rate(
            "no change: ARL0",
            name.to_owned(),
            setup,
            form,
            shapes,
        ));
    }
    let correlated = [Within(0.35, 3.0), Within(0.5, 2.0), Within(0.75, 1.35)];
    for phi in [0.0, 0.05, 0.1, 0.3, 0.6, 0.9] {
        let setup = Setup {
            phi,
            learn: 2000,
            ..even(12)
        };
        let case = format!("lag-one correlation {phi}");
        let mut row = rate("no change: ARL0", case, setup, form, correlated);
        if ![0.1, 0.6].contains(&phi) {
            row.runs[0] = 0;
        }
        rows.push(row);
    }
    for walk in [0.0, 1.0] {
        let setup = Setup { walk, ..even(12) };
        let case = format!("common random walk, step {walk} sd");
        let mut row = rate("no change: ARL0", case, setup, form, normal);
        row.runs[0] = if walk > 0.0 { row.runs[0] } else { 0 };
        rows.push(row);
    }
}

/// Budgets of plants, with sigma as good as known; before them the sampling by itself, on a statistic
/// whose thresholds are published.
pub fn rare(rows: &mut Vec<Row>) {
    for (name, arl0, threshold) in [("50 000", 5e4, GLR_OF_12_AT_50_000), ("1e6", 1e6, 5.81)] {
        rows.push(Row {
            what: "GLR over sources and starts (published): the sampling itself",
            case: format!("k 12, {name} cycles"),
            measure: Measure::RareGlr {
                setup: Setup {
                    arl0,
                    walk: 0.0,
                    ..Setup::even(12)
                },
                threshold,
            },
            runs: [400, 4000],
            asked: vec![asked(
                "realised / nominal ARL0",
                Within(0.6, 1.6),
                Within(0.85, 1.2),
                Within(0.9, 1.1),
            )],
        });
    }
    for (name, arl0, short) in [("50 000", 5e4, 0), ("1e6", 1e6, 0), ("1e7", 1e7, 0)] {
        rows.push(Row {
            what: "no change, sigma known: ARL0 by importance sampling",
            case: format!("k 12, a budget of {name} cycles"),
            measure: Measure::Rare {
                setup: Setup {
                    arl0,
                    walk: 0.0,
                    learn: 10_000,
                    spread_margin: NO_SPREAD_MARGIN,
                    ..Setup::even(12)
                },
            },
            runs: [short, 4000],
            asked: vec![asked(
                "realised / nominal ARL0",
                Anything,
                Within(0.8, 1.25),
                Within(0.9, 1.1),
            )],
        });
    }
}

/// Lasting offsets of range at most the margin.
pub fn offsets(form: Form, rows: &mut Vec<Row>) {
    let k = 12;
    let random: Vec<f64> = (0..k).map(|s| f64::from(s * 5 % 12) / 11.0).collect();
    let alternating = (0..k).map(|s| f64::from(s % 2)).collect();
    let some = |n: i32| (0..k).map(|s| f64::from(u8::from(s < n))).collect();
    let all: [(&str, Vec<f64>); 5] = [
        ("zero", some(0)),
        ("one at m", some(1)),
        ("half at m", some(6)),
        ("alternating", alternating),
        ("evenly spread", random),
    ];
    for margin in [0.25, 0.5, 1.0] {
        for (name, shares) in &all {
            let setup = Setup {
                margin,
                offsets: shares.iter().map(|share| share * margin).collect(),
                spread_margin: NO_SPREAD_MARGIN,
                ..Setup::even(k as usize)
            };
            let bounds = [AtLeast(0.55), AtLeast(0.8), Within(0.9, 1.5)];
            let case = format!("m {margin}, {name}");
            let mut row = rate("offsets within the margin: ARL0", case, setup, form, bounds);
            if margin != 0.5 || !["one at m", "half at m"].contains(name) {
                row.runs[0] = 0;
            }
            rows.push(row);
        }
    }
}

pub fn learning(rows: &mut Vec<Row>) {
    let setup = |arl0: f64| Setup {
        arl0,
        look_every: 10,
        spread_margin: NO_SPREAD_MARGIN,
        ..Setup::even(12)
    };
    rows.push(Row {
        what: "while learning",
        case: "the first 500 cycles, a look every 10".to_owned(),
        measure: Measure::FalseCalls {
            setup: setup(1000.0),
            start: Start::Fresh,
            most: 500,
        },
        runs: [120, 2000],
        asked: realised([AtLeast(0.7), AtLeast(0.8), AtLeast(0.9)]),
    });
    rows.push(Row {
        what: "while learning",
        case: "one 3 sd off from the first cycle, a look every 10".to_owned(),
        measure: Measure::FromTheFirst {
            setup: setup(50_000.0),
            change: Change::levels([(0, 3.0)]),
        },
        runs: [60, 1000],
        asked: vec![asked(
            "cycles to the call, 95 of 100 runs",
            AtMost(60.0),
            AtMost(60.0),
            AtMost(30.0),
        )],
    });
}

pub fn unpaired(rows: &mut Vec<Row>) {
    for (name, sds) in [
        ("equal spreads", vec![1.0; 4]),
        ("spreads 1:2:3:1", vec![1.0, 2.0, 3.0, 1.0]),
    ] {
        let setup = Setup {
            walk: 0.0,
            sds,
            arl0: 2000.0,
            look_every: 10,
            learn: 200,
            // Level alone.
            spread_margin: 1e6,
            pairing: Pairing::None,
            ..Setup::even(4)
        };
        rows.push(Row {
            what: "unpaired, level only: ARL0",
            case: format!("k 4, {name}, a look every 10"),
            measure: Measure::FalseCalls {
                setup,
                start: Start::Learnt(12),
                most: 4000,
            },
            runs: [60, 1200],
            asked: realised([AtLeast(0.5), Within(0.7, 1.2), Within(0.85, 1.1)]),
        });
    }
}
