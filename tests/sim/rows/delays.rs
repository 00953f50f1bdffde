//! How soon the watch calls, beside oracles at the same budget.

use super::super::feed::Setup;
use super::super::measure::{Against, Change, Measure};
use super::super::table::Bound::{AtLeast, AtMost};
use super::super::table::Row;
use super::{GLR_OF_12_AT_50_000, asked};

pub fn delays(rows: &mut Vec<Row>) {
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

pub fn delays_with_margin(rows: &mut Vec<Row>) {
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

pub fn spread(rows: &mut Vec<Row>) {
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
                AtMost(3.0),
                AtMost(2.4),
                AtMost(1.8),
            )],
        });
        rows.push(Row {
            what: "one of 12 turns erratic",
            case,
            measure: Measure::Spread {
                setup: setup(),
                change: Change::sd(0, sd),
            },
            runs: [100, 1000],
            asked: vec![
                asked(
                    "called as spread",
                    AtLeast(0.50),
                    AtLeast(0.90),
                    AtLeast(0.95),
                ),
                asked("named exactly", AtLeast(0.85), AtLeast(0.90), AtLeast(0.95)),
            ],
        });
    }
    for step in [2.5, 3.0] {
        rows.push(Row {
            what: "one of 12 steps in level",
            case: format!("{step} sd"),
            measure: Measure::Spread {
                setup: Setup::even(12),
                change: Change::levels([(0, step)]),
            },
            runs: [100, 2000],
            asked: vec![
                asked("called as spread", AtMost(0.05), AtMost(0.02), AtMost(0.01)),
                asked("named exactly", AtLeast(0.88), AtLeast(0.95), AtLeast(0.98)),
            ],
        });
    }
}
