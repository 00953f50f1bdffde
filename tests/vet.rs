//! `evenrow vet` as a process: what it prints where, and how it ends.

use std::path::Path;
use std::process::{Command, Output};

fn evenrow(arguments: &[&str], variables: &[(&str, &str)]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_evenrow"))
        .args(arguments)
        .envs(variables.iter().copied())
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .output()
        .expect("the program starts")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

/// Checks the exit code and that these words are on stdout and on stderr; no words, no output.
fn check(output: &Output, code: i32, stdout: &[&str], stderr: &[&str]) {
    let (out, err) = (text(&output.stdout), text(&output.stderr));
    assert_eq!(output.status.code(), Some(code), "{out}\n{err}");
    for (stream, words) in [(&out, stdout), (&err, stderr)] {
        assert_eq!(stream.is_empty(), words.is_empty(), "{stream}");
        for word in words {
            assert!(stream.contains(word), "{word:?} is not in\n{stream}");
        }
    }
}

fn faulty(folder: &Path) -> String {
    let sample = include_str!("../config/smallest.toml");
    let text = sample
        .replace("margin = 0.2", "margins = 0.2")
        .replace("\"none\"", "\"nome\"");
    let path = folder.join("faulty.toml");
    std::fs::write(&path, text).expect("the file can be written");
    path.to_string_lossy().into_owned()
}

#[test]
fn shipped_configurations_are_summed_up() {
    let sample = evenrow(&["vet", "--config", "config/evenrow.toml"], &[]);
    let words = [
        "config/evenrow.toml: good",
        "plant Quayside",
        "bank filler-2",
        "by slots of 10 s",
        "3.86e-7 for level",
        "1 per 90 days",
        "3 shifts, by the time a value was taken: early, late, night",
        "10, 20, 40 production days",
        "10 production days before the first look",
    ];
    check(&sample, 0, &words, &[]);
    let smallest = evenrow(&["vet", "--config", "config/smallest.toml"], &[]);
    check(&smallest, 0, &["bank press force", "a number"], &[]);
}

#[test]
fn faults_come_all_at_once_on_stderr() {
    let folder = tempfile::tempdir().expect("a folder");
    let path = faulty(folder.path());
    let output = evenrow(
        &["vet", "--config", &path],
        &[("EVENROW__STORE__KEEP_DAYS", "x")],
    );
    let words = [
        "4 faults",
        "did you mean `margin`?",
        "`margin` is missing in [[bank]]",
        "did you mean \"none\"?",
        "EVENROW__STORE__KEEP_DAYS: `keep_days`",
        "faulty.toml:",
    ];
    check(&output, 78, &[], &words);
    assert!(
        !text(&output.stderr).contains('\u{1b}'),
        "colour without a terminal"
    );
}

#[test]
fn a_missing_file_is_a_faulty_configuration() {
    let output = evenrow(&["vet", "--config", "no-such.toml"], &[]);
    check(
        &output,
        78,
        &[],
        &["no-such.toml", "cannot be read", "check the path"],
    );
}

#[test]
fn a_variable_changes_what_is_summed_up() {
    let variables = [("EVENROW__BROKER__URL", "mqtts://broker.quayside.example")];
    let output = evenrow(&["vet", "--config", "config/smallest.toml"], &variables);
    check(&output, 0, &["mqtts://broker.quayside.example:8883"], &[]);
}

#[test]
fn wrong_usage_ends_with_2_and_help_with_0() {
    check(&evenrow(&["vet"], &[]), 2, &[], &["--config"]);
    check(&evenrow(&["vett"], &[]), 2, &[], &["vet"]);
    check(&evenrow(&[], &[]), 2, &[], &["Usage"]);
    check(&evenrow(&["--help"], &[]), 0, &["vet"], &[]);
    check(
        &evenrow(&["vet", "--help"], &[]),
        0,
        &["--config <FILE>"],
        &[],
    );
}
