//! The table: every row of what the whole must show, as data.
//!
//! Short bounds are wide enough for chance at the short form's number of runs and narrow enough that a
//! watch whose thresholds, sums or names are wrong fails; what is solid and what is the aim is judged in
//! the full form, and shown in both.

use evenrow::model::Pairing;

use super::feed::{Noise, Setup};
use super::measure::{Against, Change, Measure};
use super::rig::Start;
use super::table::Bound::{self, Anything, AtLeast, AtMost, Within};
use super::table::{Asked, Form, Row};
use super::trouble;

/// Spread without a margin, so that its part of the budget is spent too.
const NO_SPREAD_MARGIN: f64 = 1.0001;

/// The rows of a form.
pub fn rows(form: Form) -> Vec<Row> {
    let mut rows = Vec::new();
    published(&mut rows);
    delays(&mut rows);
    delays_with_margin(&mut rows);
    spread(&mut rows);
    rates(form, &mut rows);
    rare(&mut rows);
    offsets(form, &mut rows);
    learning(&mut rows);
    unpaired(&mut rows);
    names(&mut rows);
    since(&mut rows);
    clearing(&mut rows);
    troubles(&mut rows);
    rows.retain(|row| row.runs(form) > 0);
    rows
}

fn asked(name: &'static str, short: Bound, solid: Bound, aim: Bound) -> Asked {
    Asked {
        name,
        short,
        solid,
        aim,
    }
}

fn published(rows: &mut Vec<Row>) {
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

/// Thresholds of the standardised sum of 12 sources at 50 000 cycles to a false call (after Siegmund and
/// Venkatraman 1995).
const GLR_OF_12_AT_50_000: f64 = 5.25;

fn delays(rows: &mut Vec<Row>) {
    for (delta, solid, aim) in [
        (0.25, 2.4, 2.15),
        (0.5, 2.0, 1.8),
        (1.0, 1.8, 1.6),
        (2.0, 1.65, 1.5),
    ] {
        let oracle = Against::Level {
            moved: 1,
            null: 0.0,
            alternative: delta,
        };
        rows.push(Row {
            what: "one of 12 moved, m = 0: delay",
            case: format!("{delta} sd"),
            measure: Measure::Delay {
                setup: Setup::even(12),
                change: Change::levels([(0, delta)]),
                against: vec![Against::Glr(GLR_OF_12_AT_50_000), oracle],
            },
            runs: [if delta < 0.5 { 60 } else { 150 }, 2000],
            asked: vec![
                asked("/ GLR", AtMost(1.35), AtMost(1.20), AtMost(1.08)),
                asked("/ oracle", AtMost(solid * 1.15), AtMost(solid), AtMost(aim)),
            ],
        });
    }
    for delta in [0.5, 1.0, 2.0] {
        rows.push(Row {
            what: "half of 12 moved, m = 0: delay",
            case: format!("{delta} sd"),
            measure: Measure::Delay {
                setup: Setup::even(12),
                change: Change::levels((0..6).map(|s| (s, delta))),
                against: vec![Against::Level {
                    moved: 6,
                    null: 0.0,
                    alternative: delta,
                }],
            },
            runs: [150, 2000],
            asked: vec![asked("/ oracle", AtMost(3.3), AtMost(2.9), AtMost(2.3))],
        });
    }
}

fn delays_with_margin(rows: &mut Vec<Row>) {
    for margin in [0.25, 0.5, 1.0] {
        let setup = || Setup {
            margin,
            ..Setup::even(12)
        };
        let delay = |moved: usize, beyond: f64| Measure::Delay {
            setup: setup(),
            change: Change::levels((0..moved).map(|s| (s, margin + beyond))),
            against: vec![Against::Level {
                moved,
                null: margin,
                alternative: margin + beyond,
            }],
        };
        let short = if margin == 0.5 { 120 } else { 0 };
        for (beyond, solid, aim) in [(0.5, 1.8, 1.6), (1.0, 1.6, 1.45), (2.0, 1.5, 1.3)] {
            rows.push(Row {
                what: "one of 12 from 0 to beyond the margin: delay",
                case: format!("m {margin}, {beyond} sd beyond"),
                measure: delay(1, beyond),
                runs: [short, 2000],
                asked: vec![asked(
                    "/ oracle",
                    AtMost(solid * 1.15),
                    AtMost(solid),
                    AtMost(aim),
                )],
            });
        }
        for beyond in [0.5, 1.0] {
            rows.push(Row {
                what: "half of 12 from 0 to beyond the margin: delay",
                case: format!("m {margin}, {beyond} sd beyond"),
                measure: delay(6, beyond),
                runs: [short, 2000],
                asked: vec![asked("/ oracle", AtMost(2.3), AtMost(2.0), AtMost(1.65))],
            });
        }
    }
}

fn spread(rows: &mut Vec<Row>) {
    for ratio in [1.5, 2.0] {
        let setup = || Setup {
            walk: 0.0,
            ..Setup::even(12)
        };
        let sd = setup().spread_margin * ratio;
        let case = format!("{ratio} times beyond the margin of 1.5");
        rows.push(Row {
            what: "one of 12 turns erratic",
            case: case.clone(),
            measure: Measure::Delay {
                setup: setup(),
                change: Change::sd(0, sd),
                against: vec![Against::Spread {
                    null: setup().spread_margin,
                    alternative: sd,
                }],
            },
            runs: [100, 2000],
            asked: vec![asked(
                "delay / oracle",
                AtMost(2.8),
                AtMost(2.4),
                AtMost(1.8),
            )],
        });
        rows.push(Row {
            what: "one of 12 turns erratic",
            case,
            measure: Measure::Names {
                setup: setup(),
                change: Change::sd(0, sd),
                after: 0,
            },
            runs: [100, 1000],
            asked: vec![
                asked("named exactly", AtLeast(0.85), AtLeast(0.90), AtLeast(0.95)),
                asked("any wrong name", AtMost(0.12), Anything, Anything),
            ],
        });
    }
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
        runs: [if heavy { 24 } else { 72 }, 1200],
        asked: vec![asked("realised / nominal ARL0", short, solid, aim)],
    }
}

fn rates(form: Form, rows: &mut Vec<Row>) {
    let even = |k: usize| Setup {
        spread_margin: NO_SPREAD_MARGIN,
        ..Setup::even(k)
    };
    let normal = [Within(0.55, 1.9), Within(0.8, 1.25), Within(0.9, 1.1)];
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
fn rare(rows: &mut Vec<Row>) {
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
    for (name, arl0, short) in [("50 000", 5e4, 0), ("1e6", 1e6, 120), ("1e7", 1e7, 0)] {
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
                Within(0.4, 2.5),
                Within(0.8, 1.25),
                Within(0.9, 1.1),
            )],
        });
    }
}

/// Lasting offsets of range at most the margin.
fn offsets(form: Form, rows: &mut Vec<Row>) {
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

fn learning(rows: &mut Vec<Row>) {
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
        asked: vec![asked(
            "realised / nominal ARL0",
            AtLeast(0.7),
            AtLeast(0.8),
            AtLeast(0.9),
        )],
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

fn unpaired(rows: &mut Vec<Row>) {
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
            spread_margin: 4.0,
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
            asked: vec![asked(
                "realised / nominal ARL0",
                AtLeast(0.5),
                Within(0.7, 1.2),
                Within(0.85, 1.1),
            )],
        });
    }
}

fn names(rows: &mut Vec<Row>) {
    let setup = |margin: f64| Setup {
        margin,
        look_every: 10,
        ..Setup::even(12)
    };
    let names = |setup: Setup, change: Change, after: f64| Measure::Names {
        setup,
        change,
        after: after.ceil() as i64,
    };
    for delta in [0.5, 1.0, 2.0] {
        rows.push(Row {
            what: "names at the call, one of 12, m = 0",
            case: format!("{delta} sd"),
            measure: names(setup(0.0), Change::levels([(0, delta)]), 0.0),
            runs: [if delta < 1.0 { 60 } else { 120 }, 2000],
            asked: vec![
                asked("exactly right", AtLeast(0.88), AtLeast(0.95), AtLeast(0.98)),
                asked("any wrong name", AtMost(0.12), AtMost(0.05), AtMost(0.02)),
            ],
        });
        rows.push(Row {
            what: "names after another 32/delta² cycles, three of 12, m = 0",
            case: format!("{delta} sd"),
            measure: names(
                setup(0.0),
                Change::levels((0..3).map(|s| (s, delta))),
                32.0 / (delta * delta),
            ),
            runs: [if delta < 1.0 { 40 } else { 80 }, 2000],
            asked: vec![
                asked("exactly right", AtLeast(0.80), AtLeast(0.90), AtLeast(0.95)),
                asked("any wrong name", AtMost(0.15), Anything, Anything),
            ],
        });
    }
    // Each is within the margin of the ten others; together they are not.
    for (margin, beyond) in [(1.0, 0.0), (1.0, 1.0), (0.5, 1.0)] {
        let far = 0.9 * margin + beyond;
        let apart = 2.0 * far - margin;
        rows.push(Row {
            what: "one of 12 up, another down, named after another 32/excess² cycles",
            case: format!("to ±(0.9 m + {beyond} sd), m {margin}"),
            measure: names(
                setup(margin),
                Change::levels([(0, far), (1, -far)]),
                32.0 / (apart * apart),
            ),
            runs: [60, 1000],
            asked: vec![
                asked("both named", AtLeast(0.80), AtLeast(0.90), AtLeast(0.95)),
                asked("any wrong name", AtMost(0.15), Anything, Anything),
            ],
        });
    }
}

fn since(rows: &mut Vec<Row>) {
    for delta in [0.5, 1.0, 2.0] {
        let width = |times: f64| AtMost(times / (delta * delta));
        rows.push(Row {
            what: "since when, at the call, one of 12, m = 0",
            case: format!("{delta} sd"),
            measure: Measure::Since {
                setup: Setup::even(12),
                change: Change::levels([(0, delta)]),
            },
            runs: [if delta < 1.0 { 60 } else { 120 }, 2000],
            asked: vec![
                asked(
                    "set holds the start",
                    AtLeast(0.82),
                    AtLeast(0.90),
                    AtLeast(0.95),
                ),
                asked("its width, cycles", width(32.0), width(25.0), width(20.0)),
            ],
        });
    }
}

fn clearing(rows: &mut Vec<Row>) {
    for (margin, h, solid, aim) in [
        (0.0, 0.25, 310.0, 210.0),
        (0.5, 0.5, 90.0, 60.0),
        (1.0, 1.0, 25.0, 16.0),
    ] {
        let setup = || Setup {
            margin,
            look_every: 5,
            ..Setup::even(12)
        };
        let away = Change::levels([(0, h + 1.5)]);
        rows.push(Row {
            what: "clearing, one of 12",
            case: format!("h {h} sd, a look every 5"),
            measure: Measure::Clearing {
                setup: setup(),
                change: away.clone(),
            },
            runs: [40, 1000],
            asked: vec![asked(
                "cycles after a full return",
                AtMost(solid * 1.2),
                AtMost(solid),
                AtMost(aim),
            )],
        });
        rows.push(Row {
            what: "clearing, one of 12",
            case: format!("h {h} sd, stays at 1.2 h"),
            measure: Measure::WrongClearing {
                setup: Setup {
                    look_every: 20,
                    ..setup()
                },
                change: away,
                stay: Change::levels([(0, 1.2 * h)]),
            },
            runs: [20, 500],
            asked: vec![asked(
                "cleared within 5 000 cycles",
                AtMost(0.15),
                AtMost(0.05),
                AtMost(0.03),
            )],
        });
    }
    for offset in [0.1, 0.15, 0.2] {
        rows.push(Row {
            what: "a constant offset, m = 0",
            case: format!("one of 12 at {offset} sd, a look every 20"),
            measure: Measure::Repeats {
                setup: Setup {
                    look_every: 20,
                    ..Setup::even(12)
                },
                change: Change::levels([(0, offset)]),
            },
            runs: [if offset == 0.15 { 8 } else { 0 }, 200],
            asked: vec![asked(
                "notices per 20 000 cycles",
                AtMost(2.5),
                AtMost(1.5),
                AtMost(1.2),
            )],
        });
    }
}

fn troubles(rows: &mut Vec<Row>) {
    use trouble::Story;
    let story = |setup: fn() -> Setup, play| Story { setup, play };
    let plant = trouble::plant;
    let all: [(&str, Story); 15] = [
        ("a source stops", story(plant, trouble::one_stops)),
        ("all stop for an hour", story(plant, trouble::all_stop)),
        (
            "one reports twice as often, by cycle",
            story(plant, trouble::twice_as_often),
        ),
        (
            "one reports twice as often, by slot",
            story(trouble::by_slot, trouble::twice_as_often),
        ),
        ("cycle numbers jump", story(plant, trouble::numbers_jump)),
        (
            "cycle numbers restart",
            story(plant, trouble::numbers_restart),
        ),
        (
            "cycle numbers repeat",
            story(plant, trouble::numbers_repeat),
        ),
        (
            "values rounded to half a sd",
            story(trouble::rounded, trouble::nothing_else),
        ),
        (
            "a week of 1 % outliers, two cycles a minute",
            story(trouble::with_outliers, trouble::a_week),
        ),
        ("a common step of 20 sd", story(plant, trouble::common_step)),
        ("a source is added", story(plant, trouble::one_is_added)),
        (
            "a source is retired and sends on",
            story(plant, trouble::one_is_retired),
        ),
        (
            "two drifts, opposite directions",
            story(plant, trouble::two_opposite),
        ),
        ("half the bank moves", story(plant, trouble::half_moves)),
        ("nothing else", story(plant, trouble::nothing_else)),
    ];
    for (case, story) in all {
        rows.push(Row {
            what: "bad conditions: nothing is called, a drift is found and named",
            case: case.to_owned(),
            measure: Measure::Trouble(story),
            runs: [2, 40],
            asked: vec![asked("borne", AtLeast(1.0), AtLeast(0.95), AtLeast(1.0))],
        });
    }
}
