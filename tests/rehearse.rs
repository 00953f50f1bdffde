//! `evenrow rehearse` as a user runs it: the real program on real and bad input.

use std::io::Write;
use std::path::{Path, PathBuf};
use std::process::{Command, Output, Stdio};

use serde_json::Value;

fn here(path: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join(path)
}

fn rehearse(config: &str, more: &[&str], input: &str) -> Output {
    let mut child = Command::new(env!("CARGO_BIN_EXE_evenrow"))
        .args(["rehearse", "--config"])
        .arg(here(config))
        .args(more)
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("the program starts");
    let mut stdin = child.stdin.take().expect("a pipe");
    // A program that ends before it reads all is judged by what it prints.
    let _ = stdin.write_all(input.as_bytes());
    drop(stdin);
    child.wait_with_output().expect("the program ends")
}

fn code(output: &Output) -> i32 {
    output.status.code().expect("an exit code")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).expect("UTF-8")
}

/// The lines of `--json`, which must all be objects with a known `type`.
fn lines(output: &Output) -> Vec<Value> {
    let read = |line: &str| -> Value {
        let value: Value = serde_json::from_str(line).expect(line);
        let kind = value["type"].as_str().expect("a type");
        assert!(["look", "notice", "summary"].contains(&kind), "{line}");
        value
    };
    text(&output.stdout).lines().map(read).collect()
}

fn of_type<'a>(lines: &'a [Value], kind: &str) -> Vec<&'a Value> {
    lines.iter().filter(|l| l["type"] == kind).collect()
}

const GEARS: &str = "tests/fixtures/gear-diameters.toml";
const GEAR_DATA: &str = "tests/fixtures/gear-diameters.csv";

#[test]
fn the_handbooks_gears_give_the_handbooks_figures() {
    let output = rehearse(GEARS, &["--json", GEAR_DATA], "");
    assert_eq!(code(&output), 0, "{}", text(&output.stderr));
    let all = lines(&output);
    let look = *of_type(&all, "look").last().expect("a last look");
    assert_eq!(look["bank"], "gears");
    assert_eq!(look["span"], 10);
    // (method, statistic, degrees of freedom, p). Printed in the handbook: Levene (median) 1.7059,
    // Bartlett 20.78580, ANOVA F 2.2969 with p 0.022661. Welch and the further digits: R 4,
    // oneway.test, bartlett.test, car::leveneTest.
    let wanted = [
        (
            "brown_forsythe",
            1.705_917_693_000_89,
            &[9.0, 90.0][..],
            0.099_082_975_552_204_7,
        ),
        (
            "bartlett",
            20.785_873_428_064_9,
            &[9.0],
            0.013_635_863_278_057_5,
        ),
        (
            "anova",
            2.296_912_413_358_52,
            &[9.0, 90.0],
            0.022_660_819_278_642_4,
        ),
        (
            "welch",
            2.055_802_426_854_25,
            &[9.0, 36.547_236_109_726_6],
            0.060_441_257_996_343,
        ),
    ];
    for (method, statistic, df, p) in wanted {
        let test = &look["tests"][method];
        let near = |found: &Value, wanted: f64, what: &str| {
            let found = found.as_f64().unwrap_or(f64::NAN);
            let error = (found - wanted).abs() / wanted;
            assert!(error < 1e-10, "{method} {what}: {found}, wanted {wanted}");
        };
        near(&test["statistic"], statistic, "statistic");
        near(&test["p"], p, "p");
        let found = test["df"].as_array().expect(method);
        assert_eq!(found.len(), df.len(), "{method}");
        for (found, wanted) in found.iter().zip(df) {
            near(found, *wanted, "df");
        }
    }
    let summary = of_type(&all, "summary");
    assert_eq!(summary.len(), 1);
    assert_eq!(summary[0]["measurements"], 100);
    assert_eq!(summary[0]["notices"], 0);
    assert_eq!(summary[0]["banks"][0]["outcomes"]["accepted"], 100);
}

#[test]
fn the_table_says_the_same() {
    let output = rehearse(GEARS, &[GEAR_DATA], "");
    assert_eq!(code(&output), 0);
    let table = text(&output.stdout);
    for part in [
        "100 measurements",
        "No notice was raised.",
        "1.7059",
        "20.7859",
        "2.2969",
        "0.022661",
        "2.0558",
    ] {
        assert!(table.contains(part), "{part} is missing in\n{table}");
    }
}

#[test]
fn a_drift_is_called_and_can_fail_a_script() {
    let config = "demo-feeds/filler.toml";
    let feed = "demo-feeds/one-drifts.csv.gz";
    let output = rehearse(config, &["--json", "--fail-on-notice", feed], "");
    assert_eq!(code(&output), 3, "{}", text(&output.stderr));
    let all = lines(&output);
    let notices = of_type(&all, "notice");
    assert_eq!(notices[0]["kind"], "level_apart");
    assert_eq!(notices[0]["state"], "unacknowledged");
    assert_eq!(notices[0]["sources"][0]["source"], "07");

    let even = "demo-feeds/even.csv.gz";
    let output = rehearse(config, &["--fail-on-notice", even], "");
    assert_eq!(code(&output), 0, "{}", text(&output.stderr));
}

#[test]
fn standard_input_and_other_column_names() {
    let input = "when;batch;diameter\n2026-03-02T06:00:00Z;1;1.006\n2026-03-02T06:00:00Z;2;0.998\n";
    let columns = [
        "--json",
        "--time-column",
        "when",
        "--source-column",
        "batch",
        "--value-column",
        "diameter",
        "-",
    ];
    let output = rehearse(GEARS, &columns, input);
    assert_eq!(code(&output), 0, "{}", text(&output.stderr));
    let all = lines(&output);
    assert_eq!(of_type(&all, "summary")[0]["measurements"], 2);
    assert_eq!(
        of_type(&all, "summary")[0]["recordings"][0],
        "standard input"
    );
}

#[test]
fn refused_lines_are_counted_and_shown_with_line_and_reason() {
    let input = "time,source,value\n\
        2026-03-02T06:00:00Z,1,1.006\n\
        yesterday,1,1.006\n\
        2026-03-02T06:01:00Z,1,many\n\
        2026-03-02T06:02:00Z,1,NaN\n\
        2026-03-02T06:03:00Z,99,1.0\n\
        2026-03-02T06:04:00Z,1,0.998\n";
    let output = rehearse(GEARS, &["--json", "-"], input);
    assert_eq!(code(&output), 0, "{}", text(&output.stderr));
    let all = lines(&output);
    let summary = of_type(&all, "summary")[0];
    assert_eq!(summary["refused"]["bad_time"], 1);
    assert_eq!(summary["refused"]["not_a_number"], 1);
    assert_eq!(summary["refused"]["not_finite"], 1);
    assert_eq!(
        summary["first_refused"][0]["place"],
        "standard input line 3"
    );
    // Which sources a bank has is the engine's to know.
    assert_eq!(summary["banks"][0]["outcomes"]["unknown_source"], 1);
    assert_eq!(summary["banks"][0]["outcomes"]["accepted"], 2);

    let table = text(&rehearse(GEARS, &["-"], input).stdout);
    assert!(table.contains("standard input line 4"), "{table}");
    assert!(table.contains("not a number"), "{table}");
}

/// Twelve days of a machine whose night is low, recorded without a source.
#[test]
fn shifts_are_compared_from_a_recording_without_sources() {
    let config = "[plant]\nname = \"Quayside\"\ntime_zone = \"UTC\"\n\
        [[plant.shift]]\nname = \"day\"\nfrom = \"06:00\"\nto = \"18:00\"\n\
        [[plant.shift]]\nname = \"night\"\nfrom = \"18:00\"\nto = \"06:00\"\n\
        [broker]\nurl = \"mqtt://127.0.0.1\"\n[store]\nfolder = \"/tmp/none\"\n\
        [[bank]]\nname = \"shifts\"\nunit = \"g\"\ntopic = \"line/net\"\npayload = \"number\"\n\
        sources = \"shifts\"\npairing = \"day\"\nmargin = 0.1\nfalse_calls = \"1 per 90 days\"\n";
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("shifts.toml");
    std::fs::write(&path, config).expect("the file can be written");
    let path = path.to_string_lossy();
    let mut input = "time,value\n".to_owned();
    let first = 1_772_431_200; // 2026-03-02T06:00:00Z
    for i in 0..12 * 96 {
        let (day, hour) = (i / 96, i % 96 / 4);
        let wave = f64::from((i * 7 + day * 13) % 11) / 10.0;
        let low = if hour >= 12 { 1.0 } else { 0.0 };
        let value = 500.0 + f64::from(day * 5 % 7) + wave - low;
        input.push_str(&format!("{},{value:.1}\n", first + i * 900));
    }
    let table = text(&rehearse(&path, &["-"], &input).stdout);
    for words in [
        "11 production days are over, and the shortest span needs 10",
        "shifts, the last 10 values per source",
        "night",
    ] {
        assert!(table.contains(words), "{words}\n{table}");
    }
    let output = rehearse(&path, &["--json", "-"], &input);
    let all = lines(&output);
    let look = of_type(&all, "look")
        .into_iter()
        .rfind(|l| l["span"] == 10)
        .expect("a look");
    assert_eq!(look["finding"], "level_apart", "{look}");
    let summary = of_type(&all, "summary")[0];
    assert_eq!(summary["banks"][0]["outcomes"]["accepted"], 12 * 96);
    assert_eq!(summary["banks"][0]["notices"], 1, "{summary}");
}

#[test]
fn what_cannot_be_done_is_said_with_its_exit_code() {
    let cases: [(&str, &[&str], i32, &str); 6] = [
        (GEARS, &["no-such-file.csv"], 1, "no-such-file.csv"),
        ("no-such.toml", &[GEAR_DATA], 78, "no-such.toml"),
        (GEARS, &["--bank", "wheels", GEAR_DATA], 2, "wheels"),
        (GEARS, &[], 2, "RECORDING"),
        (GEARS, &["-"], 1, "empty"),
        (GEARS, &["--value-column", "weight", GEAR_DATA], 1, "weight"),
    ];
    for (config, more, wanted, says) in cases {
        let output = rehearse(config, more, "");
        let said = text(&output.stderr);
        assert_eq!(code(&output), wanted, "{more:?}: {said}");
        assert!(said.contains(says), "{more:?}: {said}");
        assert!(!said.contains("panicked"), "{said}");
    }
}
