//! The manners of the house, checked: the order of the rooms, purity up to the engine, one reader of
//! clocks, files that say what they are for and stay short, nothing left for later, and nothing at
//! the top of the repository that does not belong there. Every fault is named with file and line.

#[path = "tidy/examples.rs"]
mod examples;
#[path = "tidy/rules.rs"]
mod rules;
#[path = "tidy/tokens.rs"]
mod tokens;

use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;

fn top() -> &'static Path {
    Path::new(env!("CARGO_MANIFEST_DIR"))
}

/// Every Rust file below a folder.
fn rust_files(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in fs::read_dir(folder).expect("the folder can be read") {
        let path = entry.expect("the entry can be read").path();
        if path.is_dir() {
            // Fuzzing and benchmarks are crates of their own with a folder of built files.
            if !path.ends_with("target") {
                rust_files(&path, found);
            }
        } else if path.extension().is_some_and(|e| e == "rs") {
            found.push(path);
        }
    }
}

#[test]
fn every_file_keeps_the_rules() {
    let mut files = Vec::new();
    rust_files(&top().join("src"), &mut files);
    let sources = files.len();
    rust_files(&top().join("tests"), &mut files);
    files.sort();
    assert!(
        sources > 20 && files.len() > sources,
        "too few files were found"
    );
    let mut faults = Vec::new();
    for file in &files {
        let path = file.strip_prefix(top()).expect("below the top");
        let source = fs::read_to_string(file).expect("a source file is text");
        faults.extend(rules::faults(&path.to_string_lossy(), &source));
    }
    let told: Vec<String> = faults.iter().map(ToString::to_string).collect();
    assert!(told.is_empty(), "\n{}\n", told.join("\n"));
}

#[test]
fn the_map_in_lib_rs_shows_every_room_in_order() {
    let lib = fs::read_to_string(top().join("src/lib.rs")).expect("lib.rs can be read");
    let rows = lib.lines().filter_map(|line| line.strip_prefix("//! | [`"));
    let shown: Vec<&str> = rows.filter_map(|row| row.split('`').next()).collect();
    let rooms: Vec<&str> = rules::ROOMS.concat();
    let rooms: Vec<&str> = rooms.into_iter().filter(|room| *room != "main").collect();
    assert_eq!(shown, rooms);
    for entry in fs::read_dir(top().join("src")).expect("src can be read") {
        let name = entry.expect("the entry can be read").file_name();
        let path = format!("src/{}", name.to_string_lossy());
        let known = path == "src/build.rs"
            || rules::room_of(&path).is_none_or(|room| rules::rank(room).is_some());
        assert!(known, "{path} is no room of the house");
    }
}

#[test]
fn nothing_strange_stands_at_the_top() {
    let allowed: BTreeSet<&str> = rules::TOP_LEVEL.iter().copied().collect();
    let strange: BTreeSet<String> = kept_files()
        .into_iter()
        .filter_map(|path| path.split('/').next().map(str::to_owned))
        .filter(|name| !name.starts_with('.') && !allowed.contains(name.as_str()))
        .collect();
    assert!(strange.is_empty(), "at the top: {strange:?}");
}

/// What git keeps; without git (an unpacked archive) what lies there, built files aside.
fn kept_files() -> Vec<String> {
    let git = Command::new("git")
        .args(["ls-files"])
        .current_dir(top())
        .output();
    match git {
        Ok(output) if output.status.success() && !output.stdout.is_empty() => {
            let list = String::from_utf8_lossy(&output.stdout).into_owned();
            list.lines().map(str::to_owned).collect()
        }
        _ => fs::read_dir(top())
            .expect("the top can be read")
            .map(|entry| entry.expect("the entry can be read").file_name())
            .map(|name| name.to_string_lossy().into_owned())
            .filter(|name| name != "target")
            .collect(),
    }
}
