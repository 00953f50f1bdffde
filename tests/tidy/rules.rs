//! The rules of the house as functions from a file's path and text to its faults.

use super::tokens::{Token, tokens};

/// The rooms from left to right. Those in one row do not use each other.
pub const ROOMS: &[&[&str]] = &[
    &["stats"],
    &["model"],
    &["window"],
    &["verdict"],
    &["notice"],
    &["engine"],
    &["settings"],
    &["clock"],
    &["intake", "store", "outlets", "web"],
    &["daemon"],
    &["cli"],
    &["main"],
];

/// The last room that must be a function of its arguments.
const LAST_PURE_ROOM: &str = "engine";

/// No file is longer: it must be readable in one sitting.
const MOST_LINES: usize = 500;

/// Names that have no business in a pure room: other crates that do input or output or draw random
/// numbers, the system's clocks, and containers whose order differs from run to run.
const IMPURE_WORDS: &[&str] = &[
    "tokio",
    "tokio_util",
    "tokio_stream",
    "sled",
    "rumqttc",
    "rumqttd",
    "prometheus",
    "tracing",
    "axum",
    "fastrand",
    "HashMap",
    "HashSet",
    "RandomState",
    "DefaultHasher",
    "Instant",
    "SystemTime",
    "println",
    "eprintln",
    "dbg",
];

/// Modules of the standard library that have no business in a pure room.
const IMPURE_STD: &[&str] = &["fs", "net", "env", "process", "thread", "io", "os"];

/// What may stand at the top of the repository besides names that begin with a dot.
pub const TOP_LEVEL: &[&str] = &[
    "Cargo.toml",
    "Cargo.lock",
    "README.md",
    "DEVELOPERS.md",
    "LICENSE",
    "src",
    "config",
    "tests",
    "deploy",
    "demo-feeds",
];

/// A rule broken.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// The file, from the top of the repository.
    pub path: String,
    /// The line, from 1.
    pub line: usize,
    /// What is wrong and what to do.
    pub what: String,
}

impl std::fmt::Display for Fault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "{}:{}: {}", self.path, self.line, self.what)
    }
}

/// Every fault of one Rust file.
pub fn faults(path: &str, source: &str) -> Vec<Fault> {
    let found = tokens(source);
    let mut lines: Vec<(usize, String)> = Vec::new();
    lines.extend(form(source));
    lines.extend(unfinished(source, &found));
    lines.extend(lints_without_reason(&found));
    if let Some(room) = room_of(path) {
        lines.extend(order(path, room, &found));
        if is_pure(room) {
            lines.extend(impurities(&found));
        }
        if path != "src/clock.rs" {
            lines.extend(clock_readings(&found));
        }
    }
    let fault = |(line, what)| Fault {
        path: path.to_owned(),
        line,
        what,
    };
    lines.into_iter().map(fault).collect()
}

/// The room that a file belongs to; none for `lib.rs` and for tests.
pub fn room_of(path: &str) -> Option<&str> {
    let inside = path.strip_prefix("src/")?;
    let name = inside.split('/').next()?;
    let name = name.strip_suffix(".rs").unwrap_or(name);
    (name != "lib").then_some(name)
}

/// A room's place from the left.
pub fn rank(room: &str) -> Option<usize> {
    ROOMS.iter().position(|row| row.contains(&room))
}

fn is_pure(room: &str) -> bool {
    rank(room) <= rank(LAST_PURE_ROOM)
}

fn form(source: &str) -> Vec<(usize, String)> {
    let mut faults = Vec::new();
    if !source.starts_with("//!") {
        faults.push((
            1,
            "opens without `//!` saying what the file is for".to_owned(),
        ));
    }
    let lines = source.lines().count();
    if lines > MOST_LINES {
        faults.push((
            MOST_LINES + 1,
            format!("has {lines} lines, more than {MOST_LINES}; split it"),
        ));
    }
    faults
}

fn unfinished(source: &str, found: &[Token]) -> Vec<(usize, String)> {
    // Written apart so that this file does not break its own rule.
    let marks = [
        concat!("TO", "DO"),
        concat!("FIX", "ME"),
        concat!("XX", "X"),
    ];
    let mut faults = Vec::new();
    for (index, line) in source.lines().enumerate() {
        let mut words = line.split(|c: char| !c.is_alphanumeric() && c != '_');
        if let Some(mark) = words.find(|word| marks.contains(word)) {
            faults.push((index + 1, format!("says {mark}; finish it or leave it out")));
        }
    }
    for three in found.windows(3) {
        let name = three[0].text.as_str();
        let called = three[1].text == "!" && matches!(three[2].text.as_str(), "(" | "[" | "{");
        if called && matches!(name, "todo" | "unimplemented") {
            faults.push((three[0].line, format!("uses {name}!; finish it")));
        }
    }
    for three in found.windows(3) {
        let name = three[2].text.as_str();
        let attribute = three[0].text == "#" && three[1].text == "[";
        if attribute && matches!(name, "ignore" | "should_panic") {
            faults.push((
                three[2].line,
                format!("has #[{name}]; a test runs and checks"),
            ));
        }
    }
    faults
}

fn lints_without_reason(found: &[Token]) -> Vec<(usize, String)> {
    let mut faults = Vec::new();
    for (i, token) in found.iter().enumerate() {
        let opens = i > 0 && found[i - 1].text == "[" && next_is(found, i, "(");
        if !opens || !matches!(token.text.as_str(), "allow" | "expect") {
            continue;
        }
        let inside = found[i..].iter().take_while(|t| t.text != "]");
        if !inside.into_iter().any(|t| t.text == "reason") {
            faults.push((
                token.line,
                "switches a lint off without `reason`".to_owned(),
            ));
        }
    }
    faults
}

fn next_is(found: &[Token], i: usize, text: &str) -> bool {
    found.get(i + 1).is_some_and(|t| t.text == text)
}

/// What stands directly below `root` in every path that starts there: `a` and `b` for
/// `root::{a::C, b}`.
fn children<'a>(found: &'a [Token], root: &str) -> Vec<&'a Token> {
    let mut all = Vec::new();
    for (i, token) in found.iter().enumerate() {
        let starts = i == 0 || found[i - 1].text != "::";
        if token.text == root && starts && next_is(found, i, "::") {
            all.extend(below(found, i + 2));
        }
    }
    all
}

/// The first name of each branch of the use tree that begins at `i`.
fn below(found: &[Token], i: usize) -> Vec<&Token> {
    match found.get(i) {
        Some(token) if token.text == "{" => {
            let (mut depth, mut names, mut expecting) = (0, Vec::new(), false);
            for token in &found[i..] {
                match token.text.as_str() {
                    "{" => {
                        depth += 1;
                        expecting = depth == 1;
                    }
                    "}" => {
                        depth -= 1;
                        if depth == 0 {
                            break;
                        }
                    }
                    "," => expecting = depth == 1,
                    _ if expecting => {
                        names.push(token);
                        expecting = false;
                    }
                    _ => {}
                }
            }
            names
        }
        Some(token) => vec![token],
        None => Vec::new(),
    }
}

fn order(path: &str, room: &str, found: &[Token]) -> Vec<(usize, String)> {
    let Some(own) = rank(room) else {
        return vec![(1, format!("`{room}` is no room of the house"))];
    };
    let root = if room == "main" { "evenrow" } else { "crate" };
    let mut faults: Vec<(usize, String)> = children(found, root)
        .into_iter()
        .filter(|used| used.text != room)
        .filter_map(|used| {
            let name = used.text.as_str();
            let what = match rank(name) {
                None => format!("`{root}::{name}` is no room of the house"),
                Some(other) if other < own => return None,
                Some(other) if other == own => {
                    format!("`{room}` uses `{name}`, and rooms side by side do not use each other")
                }
                Some(_) => format!("`{room}` uses `{name}`, which stands to its right"),
            };
            Some((used.line, what))
        })
        .collect();
    faults.extend(climbs_out(path, found));
    faults
}

/// Paths of `super` that leave their room: they would evade the order.
fn climbs_out(path: &str, found: &[Token]) -> Vec<(usize, String)> {
    let mut faults = Vec::new();
    let depth = module_depth(path);
    // The depths of braces at which inline modules were opened.
    let (mut braces, mut modules) = (0_usize, Vec::new());
    let mut i = 0;
    while i < found.len() {
        match found[i].text.as_str() {
            "mod" if found.get(i + 2).is_some_and(|t| t.text == "{") => modules.push(braces),
            "{" => braces += 1,
            "}" => {
                braces = braces.saturating_sub(1);
                if modules.last() == Some(&braces) {
                    modules.pop();
                }
            }
            "super" => {
                let line = found[i].line;
                let mut steps = 1;
                while next_is(found, i, "::") && next_is(found, i + 1, "super") {
                    steps += 1;
                    i += 2;
                }
                let in_path = next_is(found, i, "::");
                if in_path && steps >= depth + modules.len() {
                    faults.push((
                        line,
                        "climbs out of its room with `super`; say `crate::…`".to_owned(),
                    ));
                }
            }
            _ => {}
        }
        i += 1;
    }
    faults
}

/// How many modules deep a file is: 1 for a room's own file.
fn module_depth(path: &str) -> usize {
    let inside = path.trim_start_matches("src/").trim_end_matches(".rs");
    inside.trim_end_matches("/mod").split('/').count()
}

fn impurities(found: &[Token]) -> Vec<(usize, String)> {
    let words = found
        .iter()
        .filter(|t| IMPURE_WORDS.contains(&t.text.as_str()));
    let std = children(found, "std").into_iter();
    let std = std.filter(|t| IMPURE_STD.contains(&t.text.as_str()));
    let what = |t: &Token| {
        let name = &t.text;
        let why = "the rooms up to `engine` are functions of their arguments";
        (t.line, format!("uses `{name}`, and {why}"))
    };
    words.map(what).chain(std.map(what)).collect()
}

/// `now` of a type, such as `Instant::now`. A function of ours that is called `now` reads no clock by
/// itself; whatever it calls is looked at where it stands.
fn clock_readings(found: &[Token]) -> Vec<(usize, String)> {
    let is_type = |t: &Token| t.text.starts_with(|c: char| c.is_uppercase());
    let reads =
        |three: &&[Token]| is_type(&three[0]) && three[1].text == "::" && three[2].text == "now";
    let what = "reads a clock; only `src/clock.rs` does, others are told the time";
    found
        .windows(3)
        .filter(reads)
        .map(|three| (three[2].line, what.to_owned()))
        .collect()
}
