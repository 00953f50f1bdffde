//! Makes the recordings of `demo-feeds` from the filler's model: the same text on every machine.

use std::fmt::Write as _;

use evenrow::cli::demo::filler::{Filler, HEADS, Retarget, Spell, Trouble, Weight};
use evenrow::cli::demo::story::head_name;
use evenrow::model::Time;

/// 2026-03-02T06:00:00Z, the first cycle of every recording.
const START_US: i64 = 1_772_431_200_000_000;
/// From one cycle to the next.
const CYCLE_US: i64 = 5_000_000;
/// Two hours.
const CYCLES: u64 = 1_440;
/// When something begins to be wrong, where something does.
const TROUBLE_FROM: u64 = 800;
const SEED: u64 = 2_026;

/// The name of every recording and its text.
pub fn all() -> Vec<(&'static str, String)> {
    let filler = Filler::new(SEED);
    let drift = Spell {
        head: 6,
        trouble: Trouble::Level { offset_g: -2.5 },
        from: TROUBLE_FROM,
        ramp: 120,
        until: 1_320,
    };
    let erratic = Spell {
        head: 2,
        trouble: Trouble::Erratic { times: 2.5 },
        from: TROUBLE_FROM,
        ramp: 1,
        until: 1_260,
    };
    let change = Retarget {
        from: 700,
        target_g: 513.0,
    };
    let with = |spell| filler.clone().with_spells(vec![spell]);
    let everything = |_, _| true;
    vec![
        ("even", wide(&filler, everything)),
        ("one-drifts", wide(&with(drift), everything)),
        ("turns-erratic", wide(&with(erratic), everything)),
        (
            "common-movement-only",
            wide(&filler.clone().with_wander(4.0), everything),
        ),
        ("gaps", wide(&filler, is_there)),
        ("late-and-double", late_and_double(&filler)),
        (
            "changeover",
            wide(&filler.clone().with_retarget(change), everything),
        ),
    ]
}

fn taken(cycle: u64) -> Time {
    Time::from_us(START_US).plus_us(CYCLE_US * cycle as i64)
}

/// One row per cycle, one column per head; a value that is not there leaves its cell empty, and a
/// cycle without any its row out.
fn wide(filler: &Filler, is_there: impl Fn(u64, usize) -> bool) -> String {
    let mut text = "time,cycle".to_owned();
    for head in 0..HEADS {
        let _ = write!(text, ",{}", head_name(head));
    }
    text.push('\n');
    for cycle in 0..CYCLES {
        let weights = filler.weigh(cycle);
        if (0..HEADS).all(|head| !is_there(cycle, head)) {
            continue;
        }
        let _ = write!(text, "{},{cycle}", taken(cycle));
        for (head, weight) in weights.iter().enumerate() {
            text.push(',');
            if is_there(cycle, head) {
                let _ = write!(text, "{weight}");
            }
        }
        text.push('\n');
    }
    text
}

/// What is missing in `gaps`.
fn is_there(cycle: u64, head: usize) -> bool {
    let every_third = head == 4 && (300..660).contains(&cycle) && cycle.is_multiple_of(3);
    let away = head == 8 && (500..620).contains(&cycle);
    let stands = (800..1_040).contains(&cycle);
    let four_only = cycle == 1_100 && head >= 4;
    !(every_third || away || stands || four_only)
}

/// Cycles in `late-and-double`.
const SHORT: u64 = 480;
/// How many cycles a late value comes late: more than a cycle waits.
const LATE: u64 = 6;

/// Every 97th value arrives late, every 61st twice (never both).
fn late_and_double(filler: &Filler) -> String {
    let mut text = "time,source,value,cycle\n".to_owned();
    let mut waiting: Vec<(u64, String)> = Vec::new();
    for cycle in 0..SHORT {
        for (head, weight) in filler.weigh(cycle).iter().enumerate() {
            let row = row(cycle, head, *weight);
            match arrival(cycle, head) {
                Arrival::Late => waiting.push((cycle + LATE, row)),
                Arrival::Double => text.push_str(&row.repeat(2)),
                Arrival::Once => text.push_str(&row),
            }
        }
        let due = waiting.extract_if(.., |(due, _)| *due <= cycle);
        text.extend(due.map(|(_, row)| row));
    }
    text
}

/// How a value arrives.
#[derive(Clone, Copy, PartialEq, Eq)]
enum Arrival {
    Once,
    Late,
    Double,
}

fn arrival(cycle: u64, head: usize) -> Arrival {
    let number = cycle * HEADS as u64 + head as u64;
    if number % 97 == 50 && cycle + LATE < SHORT {
        Arrival::Late
    } else if number % 61 == 30 {
        Arrival::Double
    } else {
        Arrival::Once
    }
}

/// How many values of `late-and-double` arrive late, and how many twice.
pub fn late_and_doubled() -> (u64, u64) {
    let all = (0..SHORT).flat_map(|c| (0..HEADS).map(move |h| arrival(c, h)));
    all.fold((0, 0), |(late, double), a| match a {
        Arrival::Late => (late + 1, double),
        Arrival::Double => (late, double + 1),
        Arrival::Once => (late, double),
    })
}

fn row(cycle: u64, head: usize, weight: Weight) -> String {
    format!("{},{},{weight},{cycle}\n", taken(cycle), head_name(head))
}
