//! The modules of this room use each other in one direction.

use std::fs;
use std::path::{Path, PathBuf};

/// From left to right; a module uses only modules to its left, and those below it.
const ORDER: &[&str] = &[
    "address",
    "certificate",
    "durations",
    "format",
    "problem",
    "assets",
    "tokens",
    "limits",
    "sessions",
    "readings",
    "story",
    "then",
    "pulse",
    "kept",
    "days",
    "site",
    "access",
    "deeds",
    "wire",
    "line",
    "pictures",
    "standing",
    "handover",
    "pages",
    "signin",
    "sharing",
    "health",
    "live",
    "metrics",
    "api",
    "openapi",
    "limiting",
    "dress",
    "server",
];

fn rank(module: &str) -> Option<usize> {
    ORDER.iter().position(|m| *m == module)
}

fn files(folder: &Path, found: &mut Vec<PathBuf>) {
    for entry in fs::read_dir(folder).expect("a folder") {
        let path = entry.expect("an entry").path();
        if path.is_dir() {
            files(&path, found);
        } else if path.extension().is_some_and(|e| e == "rs") {
            found.push(path);
        }
    }
}

/// The modules that a file's lines name: `super::x` beside the rooms' own files, `web::x` anywhere.
fn uses(source: &str, is_top: bool) -> Vec<&str> {
    let code = source.split("#[cfg(test)]").next().unwrap_or_default();
    let lines = code.lines().filter(|l| !l.trim_start().starts_with("//"));
    let mut found = Vec::new();
    for line in lines {
        let starts: &[&str] = if is_top {
            &["super::", "web::"]
        } else {
            &["web::"]
        };
        for start in starts {
            for (at, _) in line.match_indices(start) {
                let rest = line.get(at + start.len()..).unwrap_or_default();
                let list = rest.strip_prefix('{').map(|l| l.split(','));
                let names: Vec<&str> = list.map_or_else(|| vec![rest], Iterator::collect);
                found.extend(names.into_iter().map(|n| {
                    let end = n.trim().find(|c: char| !c.is_ascii_lowercase() && c != '_');
                    let n = n.trim();
                    end.map_or(n, |end| n.get(..end).unwrap_or(n))
                }));
            }
        }
    }
    found
}

#[test]
fn modules_lean_to_the_left() {
    let room = Path::new(env!("CARGO_MANIFEST_DIR")).join("src/web");
    let mut all = Vec::new();
    files(&room, &mut all);
    assert!(all.len() > 50, "{}", all.len());
    let mut faults = Vec::new();
    for file in &all {
        let inside = file.strip_prefix(&room).expect("below the room");
        let mut parts = inside.iter().map(|p| p.to_string_lossy().into_owned());
        let first = parts.next().expect("a name");
        let module = first.trim_end_matches(".rs").to_owned();
        if matches!(module.as_str(), "mod" | "tests" | "sample") {
            continue;
        }
        let Some(own) = rank(&module) else {
            faults.push(format!("{module} has no place in the order"));
            continue;
        };
        let source = fs::read_to_string(file).expect("text");
        for used in uses(&source, parts.next().is_none()) {
            if rank(used).is_some_and(|used| used > own) {
                faults.push(format!("{} uses {used}", inside.display()));
            }
        }
    }
    assert!(faults.is_empty(), "{faults:#?}");
}

#[test]
fn a_use_is_found_in_every_form() {
    for (line, is_top, names) in [
        ("use super::site::App;", true, vec!["site"]),
        ("use super::site::App;", false, vec![]),
        (
            "use crate::web::{story, then};",
            false,
            vec!["story", "then"],
        ),
        ("    crate::web::story::names(n)", false, vec!["story"]),
    ] {
        assert_eq!(uses(line, is_top), names, "{line}");
    }
}
