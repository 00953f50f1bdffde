//! What notices say, how they end, and what bad conditions do.

use super::super::feed::Setup;
use super::super::measure::{Change, Measure};
use super::super::table::Bound::{self, Anything, AtLeast, AtMost};
use super::super::table::Row;
use super::super::trouble;
use super::asked;

pub fn names(rows: &mut Vec<Row>) {
    // Names follow the looks: several come before they are asked for.
    let names = |margin: f64, change: Change, after: f64| Measure::Names {
        setup: Setup {
            margin,
            look_every: (after as i64 / 4).clamp(1, 10),
            ..Setup::even(12)
        },
        change,
        after: after.ceil() as i64,
    };
    for delta in [0.5, 1.0, 2.0] {
        rows.push(Row {
            what: "names at the call, one of 12, m = 0",
            case: format!("{delta} sd"),
            measure: names(0.0, Change::levels([(0, delta)]), 0.0),
            runs: [if delta < 1.0 { 60 } else { 120 }, 2000],
            asked: vec![
                asked("exactly right", AtLeast(0.82), AtLeast(0.95), AtLeast(0.98)),
                asked("any wrong name", AtMost(0.18), AtMost(0.05), AtMost(0.02)),
            ],
        });
        rows.push(Row {
            what: "names after another 32/delta² cycles, three of 12, m = 0",
            case: format!("{delta} sd"),
            measure: names(
                0.0,
                Change::levels((0..3).map(|s| (s, delta))),
                32.0 / (delta * delta),
            ),
            runs: [if delta < 1.0 { 40 } else { 80 }, 2000],
            asked: vec![
                asked("exactly right", AtLeast(0.45), AtLeast(0.90), AtLeast(0.95)),
                asked("any wrong name", AtMost(0.35), Anything, Anything),
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
                margin,
                Change::levels([(0, far), (1, -far)]),
                32.0 / (apart * apart),
            ),
            runs: [60, 1000],
            asked: vec![
                asked("both named", Anything, AtLeast(0.90), AtLeast(0.95)),
                asked("any wrong name", AtMost(0.15), Anything, Anything),
            ],
        });
    }
}

pub fn since(rows: &mut Vec<Row>) {
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

pub fn clearing(rows: &mut Vec<Row>) {
    for (margin, h, look_every, solid, aim) in [
        (0.0, 0.25, 10, 310.0, 210.0),
        (0.5, 0.5, 2, 90.0, 60.0),
        (1.0, 1.0, 1, 25.0, 16.0),
    ] {
        let setup = || Setup {
            margin,
            look_every,
            ..Setup::even(12)
        };
        let away = Change::levels([(0, h + 1.5)]);
        rows.push(Row {
            what: "clearing, one of 12",
            case: format!("h {h} sd, a look every {look_every}"),
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
            case: format!("h {h} sd, stays at 1.2 h, a look every 50"),
            measure: Measure::WrongClearing {
                setup: Setup {
                    look_every: 50,
                    ..setup()
                },
                change: away,
                stay: Change::levels([(0, 1.2 * h)]),
            },
            runs: [12, 500],
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

pub fn troubles(rows: &mut Vec<Row>) {
    use trouble::Story;
    let story = |setup: fn() -> Setup, play| Story { setup, play };
    let plant = trouble::plant;
    let all: [(&str, Story); 14] = [
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
        ("nothing else", story(plant, trouble::nothing_else)),
    ];
    let borne = |case: &str, story: Story, runs: [usize; 2], short: Bound| Row {
        what: "bad conditions: nothing is called, a drift is found and named",
        case: case.to_owned(),
        measure: Measure::Trouble(story),
        runs,
        asked: vec![asked("borne", short, AtLeast(0.95), AtLeast(1.0))],
    };
    rows.extend(all.map(|(case, story)| borne(case, story, [2, 40], AtLeast(1.0))));
    let half = story(plant, trouble::half_moves);
    rows.push(borne(
        "half the bank moves: split in two",
        half,
        [8, 40],
        Anything,
    ));
}
