//! Reading the check values.

use serde_json::Value;
use std::path::Path;

pub fn text(name: &str) -> String {
    let path = Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("tests/fixtures")
        .join(name);
    std::fs::read_to_string(&path).unwrap_or_else(|e| panic!("{}: {e}", path.display()))
}

/// Rows of a table without its header and comments, split at `separator`.
pub fn cells(name: &str, header: usize, separator: char) -> Vec<Vec<String>> {
    let text = text(name);
    let lines = text
        .lines()
        .filter(|l| !l.starts_with('#') && !l.is_empty())
        .skip(header);
    lines
        .map(|l| l.split(separator).map(str::to_owned).collect())
        .collect()
}

pub fn number(text: &str) -> f64 {
    text.trim()
        .parse()
        .unwrap_or_else(|_| panic!("{text:?} is not a number"))
}

pub fn json(name: &str) -> Value {
    serde_json::from_str(&text(name)).expect("a fixture is valid JSON")
}

/// Numbers of a list; null is NaN.
pub fn numbers(value: &Value) -> Vec<f64> {
    let list = value.as_array().expect("a list of numbers");
    list.iter()
        .map(|v| v.as_f64().unwrap_or(f64::NAN))
        .collect()
}

/// The groups of a data set, either a list of lists or an object of lists in the order of the file.
pub fn groups(value: &Value) -> Vec<Vec<f64>> {
    match value {
        Value::Array(list) => list.iter().map(numbers).collect(),
        Value::Object(map) => map.values().map(numbers).collect(),
        _ => panic!("groups are a list or an object"),
    }
}

pub fn slices(groups: &[Vec<f64>]) -> Vec<&[f64]> {
    groups.iter().map(Vec::as_slice).collect()
}
