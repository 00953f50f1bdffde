//! No public statistic without an entry.

use crate::table::Row;
use std::path::Path;

/// Public functions that compute no statistic.
const NOT_STATISTICS: &[&str] = &[
    "new",
    "from_rows",
    "push",
    "sources",
    "len",
    "is_empty",
    "get",
    "source_values",
    "rows",
    "k",
];

/// Files of `dist` whose items cannot be reached from outside.
const INTERNAL: &[&str] = &["kernel", "root", "outer", "tail_table", "control"];

/// Public functions of `src/stats` that no row names, as faults; and names that do not exist.
pub fn missing(rows: &[Row]) -> Vec<String> {
    let mut names = Vec::new();
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("src/stats");
    collect(&root, "", &mut names);
    let covered = |name: &String| rows.iter().any(|r| r.covers.contains(&name.as_str()));
    let mut faults: Vec<String> = names
        .iter()
        .filter(|name| !covered(name))
        .map(|name| format!("{name} has no entry"))
        .collect();
    for name in rows.iter().flat_map(|r| r.covers) {
        if !names.iter().any(|n| n == name) {
            faults.push(format!("{name} is named by a row but does not exist"));
        }
    }
    faults
}

/// Names like `anova` or, for distributions, `f::sf` (file or folder before the function).
fn collect(folder: &Path, prefix: &str, names: &mut Vec<String>) {
    let mut entries: Vec<_> = std::fs::read_dir(folder)
        .expect("src/stats is there")
        .map(|entry| entry.expect("a directory entry").path())
        .collect();
    entries.sort();
    for path in entries {
        let stem = path
            .file_stem()
            .and_then(|s| s.to_str())
            .unwrap_or_default()
            .to_owned();
        if INTERNAL.contains(&stem.as_str()) {
            continue;
        }
        if path.is_dir() {
            collect(&path, &format!("{stem}::"), names);
        } else if path.extension().is_some_and(|e| e == "rs") {
            let distribution = folder.ends_with("dist").then(|| format!("{stem}::"));
            let prefix = distribution.as_deref().unwrap_or(prefix);
            functions(
                &std::fs::read_to_string(&path).expect("a source file"),
                prefix,
                names,
            );
        }
    }
}

fn functions(source: &str, prefix: &str, names: &mut Vec<String>) {
    for line in source.lines() {
        let Some(rest) = line.trim_start().strip_prefix("pub fn ") else {
            continue;
        };
        let name = rest.split(['(', '<']).next().unwrap_or_default();
        if !NOT_STATISTICS.contains(&name) {
            names.push(format!("{prefix}{name}"));
        }
    }
}
