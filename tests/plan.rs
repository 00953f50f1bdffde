//! `evenrow plan`: what it promises is what the whole engine does, and the program as a user runs it.

#[path = "common/line.rs"]
mod line;

use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use evenrow::cli::plan::assumed::Assumed;
use evenrow::cli::plan::outcome::Outcome;
use evenrow::cli::plan::scene::{Drift, Scene};
use evenrow::cli::plan::trial::Trials;
use evenrow::engine::Record;
use serde_json::Value;

use line::{Line, bank, even};

/// Cycles until sigma counts as known with twelve sources, and some more.
const LEARNT: i64 = 3_500;
/// Trials through the whole engine.
const TRIALS: u64 = 60;
/// Even cycles before each of them, besides one for each trial.
const LEAD: i64 = 12;

/// The state of a bank that has learnt.
fn learnt() -> Vec<u8> {
    let mut line = Line::new(bank(12), 5);
    line.run(LEARNT, even);
    assert!(line.raised().is_empty(), "{:?}", line.raised());
    let now = line.now();
    let states = line.engine.checkpoints(now).into_iter();
    let mut states = states.filter_map(|r| match r {
        Record::Checkpoint { state, .. } => Some(state),
        _ => None,
    });
    states.next().expect("the bank has a state")
}

/// Cycles from the fault to the notice, of every trial, sorted.
fn through_the_engine(state: &[u8], fault: impl Fn(usize) -> (f64, f64)) -> Vec<f64> {
    let one = |trial: u64| {
        let mut line = Line::new(bank(12), 1_000 + trial);
        line.engine
            .restore("filler-2", state)
            .expect("its own state");
        line.cycle = LEARNT;
        line.run(LEAD + trial as i64, even);
        assert!(line.raised().is_empty(), "trial {trial}");
        (1..2_000)
            .find(|_| {
                line.run(1, |source, _| fault(source));
                !line.raised().is_empty()
            })
            .map_or(f64::INFINITY, f64::from)
    };
    let mut all: Vec<f64> = (0..TRIALS).map(one).collect();
    all.sort_by(f64::total_cmp);
    all
}

/// The median with its standard error from the order statistics.
fn median(sorted: &[f64]) -> (f64, f64) {
    let n = sorted.len();
    let step = (n as f64).sqrt() / 2.0;
    let at = |place: f64| sorted[(place as usize).min(n - 1)];
    let middle = n as f64 / 2.0;
    (at(middle), 0.5 * (at(middle + step) - at(middle - step)))
}

/// What the engine did is what was planned, within three standard errors of both together (and a cycle,
/// which is the step of both).
fn check(what: &str, planned: &Outcome, done: &[f64]) {
    let planned_median = planned.median_us.expect("found in time");
    let (planned_cycles, planned_error) = (planned_median.value / 1e6, planned_median.error / 1e6);
    let (cycles, error) = median(done);
    let off = (cycles - planned_cycles).abs();
    let may = 3.0 * error.hypot(planned_error) + 1.0;
    assert!(
        off <= may,
        "{what}: planned {planned_cycles} ({planned_error}), done {cycles} ({error})"
    );
    // By the planned median half of them have called, by the planned nine in ten nine in ten.
    let ninety = planned.ninety_us.expect("found in time").value / 1e6;
    for (time, share) in [(planned_cycles, 0.5), (ninety, 0.9)] {
        let called = done.iter().filter(|c| **c <= time).count() as f64 / done.len() as f64;
        let both = 1.0 / done.len() as f64 + 1.0 / planned.trials as f64;
        let may = 3.0 * (share * (1.0 - share) * both).sqrt() + 0.05;
        assert!(
            (called - share).abs() <= may,
            "{what}: {called} of them called within the {share} of {time} cycles"
        );
    }
}

#[test]
fn the_engine_keeps_what_plan_promises() {
    let bank = bank(12);
    let assumed = Assumed {
        sources: 12,
        sd: 1.0,
        own_sd: Vec::new(),
        phi: 0.0,
        interval_us: 1_000_000,
        from: "as given".to_owned(),
    };
    let trials = Trials::new(&assumed, &bank, 7).expect("it learns");
    let scenes = Scene::all(&assumed, bank.margin, bank.spread_margin);
    let scene = |drift: Drift, beyond: f64| {
        let found = scenes
            .iter()
            .find(|s| s.drift == drift && s.beyond == beyond);
        *found.expect("it is tried")
    };
    let state = learnt();
    let one = scene(Drift::One, 1.0);
    let off = one.size;
    let done = through_the_engine(&state, |s| (if s == 1 { off } else { 0.0 }, 1.0));
    check("one source", &trials.of(&one, 11), &done);
    let half = scene(Drift::Half, 1.0);
    let off = half.size;
    let done = through_the_engine(&state, |s| (if s <= 6 { off } else { 0.0 }, 1.0));
    check("half the bank", &trials.of(&half, 12), &done);
    let erratic = scene(Drift::Erratic, 2.0);
    let ratio = erratic.size;
    let done = through_the_engine(&state, |s| (0.0, if s == 1 { ratio } else { 1.0 }));
    check("erratic", &trials.of(&erratic, 13), &done);
}

fn here(path: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join(path)
}

fn plan(config: &Path, more: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_evenrow"))
        .args(["plan", "--config"])
        .arg(config)
        .args(more)
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .output()
        .expect("the program starts")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).expect("UTF-8")
}

#[test]
fn wrong_input_is_told_with_its_code() {
    let filler = here("demo-feeds/filler.toml");
    let gears = here("tests/fixtures/gear-diameters.toml");
    for (config, more, code, words) in [
        (&filler, &[][..], 2, "--sd"),
        (&filler, &["--sd", "1"], 2, "--cycle"),
        (&filler, &["--sd", "0", "--cycle", "4s"], 2, "above 0"),
        (&filler, &["--sd", "1", "--cycle", "4"], 2, "with its unit"),
        (
            &filler,
            &["--sd", "1", "--cycle", "4s", "--bank", "filler-9"],
            2,
            "no bank 'filler-9'",
        ),
        (&filler, &["--recording", "no/such.csv"], 1, "no/such.csv"),
        (
            &gears,
            &["--recording", "demo-feeds/filler.toml"],
            1,
            "demo-feeds/filler.toml",
        ),
        (
            &here("README.md"),
            &["--sd", "1", "--cycle", "4s"],
            78,
            "README.md",
        ),
    ] {
        let output = plan(config, more);
        let told = text(&output.stderr);
        assert_eq!(output.status.code(), Some(code), "{more:?}: {told}");
        assert!(told.contains(words), "{more:?}: {told}");
        assert!(output.stdout.is_empty(), "{more:?}");
    }
}

/// A bank of three, so that a plan takes a moment; paired by cycle or not at all.
fn small(pairing: &str, folder: &Path) -> PathBuf {
    let config = format!(
        r#"
[plant]
name = "Quayside"
time_zone = "Europe/Lisbon"
[broker]
url = "mqtt://127.0.0.1:1883"
[store]
folder = "store"
[[bank]]
name = "press"
unit = "kN"
topic = "quayside/press/{{source}}"
payload = {{ form = "json", value = "/v", cycle = "/n" }}
sources = ["1", "2", "3"]
pairing = "{pairing}"
spans = [10, 40]
margin = 0.5
false_calls = "1 per 30 days"
"#
    );
    let file = folder.join("press.toml");
    std::fs::write(&file, config).expect("written");
    file
}

/// The figures of a setting's drift.
fn found<'a>(plan: &'a Value, setting: &str, drift: usize) -> &'a Value {
    let settings = plan["settings"].as_array().expect("a list");
    let one = settings.iter().find(|s| s["setting"] == setting);
    &one.expect("it is there")["drifts"][drift]["found"]
}

#[test]
fn a_plan_is_told_as_json_and_drawn() {
    let folder = tempfile::tempdir().expect("a folder");
    for (pairing, decides, worth) in [("cycle", "watch", "estimate"), ("none", "look", "bound")] {
        let config = small(pairing, folder.path());
        let picture = folder.path().join(format!("{pairing}.svg"));
        let drawn = picture.display().to_string();
        let given = ["--sd", "1", "--cycle", "10s", "--json", "--picture", &drawn];
        let output = plan(&config, &given);
        assert_eq!(output.status.code(), Some(0), "{}", text(&output.stderr));
        let told: Value = serde_json::from_slice(&output.stdout).expect("JSON");
        assert_eq!(told["decides"], decides);
        let median =
            |setting: &str, drift| found(&told, setting, drift)["median_s"]["value"].as_f64();
        assert_eq!(found(&told, "as_configured", 4)["worth"], worth);
        // Larger drifts are found sooner, rarer false calls and a larger margin cost time.
        let (small, large) = (median("as_configured", 1), median("as_configured", 4));
        let later = |time: Option<f64>| time.unwrap_or(f64::INFINITY);
        assert!(
            later(small) > later(large),
            "{pairing}: {small:?} {large:?}"
        );
        let rarer = median("a_tenth_of_the_false_calls", 4);
        assert!(later(rarer) >= later(large), "{pairing}");
        let twice = median("twice_the_margin", 4);
        assert!(later(twice) >= later(large), "{pairing}");
        // At twice the margin the smallest drift is none.
        assert!(found(&told, "twice_the_margin", 0).is_null(), "{pairing}");
        if pairing == "none" {
            let longer = median("longer_span", 1);
            assert!(
                longer.is_some(),
                "a span of 160 finds one sd beyond the margin"
            );
        }
        let svg = std::fs::read_to_string(&picture).expect("it was drawn");
        for part in [
            "<title",
            "How soon is a drift found?",
            "<desc",
            "one source is off by … kN",
        ] {
            assert!(svg.contains(part), "{pairing}: {part}");
        }
        assert!(!svg.contains("NaN"), "{pairing}");
    }
}
