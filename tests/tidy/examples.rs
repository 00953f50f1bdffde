//! Small wrong files and the fault that each must give, and right ones that must give none: a checker
//! that finds nothing is only good news when it is known to find something.

use super::rules::faults;

/// The faults of a file whose second line onwards is `body`, without the path.
fn found(path: &str, body: &str) -> Vec<String> {
    let source = format!("//! An example.\n{body}");
    let cut = format!("{path}:");
    let all = faults(path, &source).into_iter();
    all.map(|f| f.to_string().replacen(&cut, "", 1)).collect()
}

/// One fault on `line` that says `what`.
#[track_caller]
fn bad(path: &str, body: &str, line: usize, what: &str) {
    let all = found(path, body);
    assert_eq!(all.len(), 1, "{body:?} gave {all:#?}");
    let start = format!("{line}: ");
    assert!(
        all[0].starts_with(&start) && all[0].contains(what),
        "{body:?} gave {all:#?}, wanted line {line}: {what}"
    );
}

#[track_caller]
fn good(path: &str, body: &str) {
    let all = found(path, body);
    assert!(all.is_empty(), "{body:?} gave {all:#?}");
}

#[test]
fn a_room_uses_only_rooms_to_its_left() {
    let right = "which stands to its right";
    let engine = "src/engine/mod.rs";
    bad(engine, "use crate::store::Store;", 2, right);
    bad(
        engine,
        "use crate::{\n    model::Time,\n    web::Page,\n};",
        4,
        right,
    );
    bad(
        "src/stats/level.rs",
        "fn f(t: crate::model::Time) {}",
        2,
        right,
    );
    bad("src/model.rs", "use crate\n    ::verdict::Look;", 3, right);
    bad(
        "src/clock.rs",
        "macro_rules! m { () => { $crate::daemon::run() } }",
        2,
        right,
    );
    bad(
        "src/outlets/mqtt.rs",
        "use crate::intake::topic;",
        2,
        "side by side",
    );
    bad(
        "src/web/mod.rs",
        "use crate::{store::Store, web::Page};",
        2,
        "side by side",
    );
    bad("src/web/mod.rs", "use crate::*;", 2, "no room");
    bad("src/web/mod.rs", "use crate::Helper;", 2, "no room");
    bad("src/helpers/mod.rs", "fn f() {}", 1, "`helpers` is no room");
    good(
        engine,
        "use crate::{model::{Name, Time}, notice::Notice};\nuse crate::engine::Event;",
    );
    good(
        "src/daemon/mod.rs",
        "use crate::{intake, outlets, store, web};",
    );
    good("src/main.rs", "fn main() { evenrow::cli::run() }");
    good("src/lib.rs", "pub mod web;\npub use crate::web::Page;");
    good(
        "src/model.rs",
        "// crate::web is far away\nconst T: &str = \"crate::web::Page\";",
    );
    good("src/model.rs", "pub(crate) fn f() {}");
}

#[test]
fn super_does_not_climb_out_of_a_room() {
    let climbs = "climbs out";
    bad("src/engine/mod.rs", "use super::web::Page;", 2, climbs);
    bad("src/model.rs", "use super::*;", 2, climbs);
    bad(
        "src/engine/event.rs",
        "use super::super::web::Page;",
        2,
        climbs,
    );
    bad(
        "src/engine/event.rs",
        "mod tests {\n    use super::super::super::web::Page;\n}",
        3,
        climbs,
    );
    bad(
        "src/engine/event.rs",
        "mod a {}\nuse super::super::web;",
        3,
        climbs,
    );
    good("src/engine/event.rs", "use super::snapshot::Snapshot;");
    good(
        "src/engine/event.rs",
        "mod tests {\n    use super::super::Snapshot;\n    use super::*;\n}",
    );
    good(
        "src/engine/mod.rs",
        "#[cfg(test)]\nmod tests {\n    use super::*;\n}",
    );
    good(
        "src/outlets/mqtt/link.rs",
        "pub(super) fn f() {}\nuse super::super::Report;",
    );
}

#[test]
fn the_rooms_up_to_the_engine_are_pure() {
    let pure = "functions of their arguments";
    let engine = "src/engine/mod.rs";
    for body in [
        "use tokio::sync::mpsc;",
        "fn f(db: sled::Db) {}",
        "use rumqttc::QoS;",
        "use prometheus::Registry;",
        "fn f() { tracing::info!(\"x\"); }",
        "use std::fs;",
        "use std::{net::TcpStream, sync::Arc};",
        "use std::{sync::Arc, collections::{BTreeMap, HashMap}};",
        "fn f(s: std::collections::HashSet<u8>) {}",
        "use std::time::{Duration, Instant};",
        "use std::time::SystemTime;",
        "fn f() -> f64 { fastrand::f64() }",
        "fn f() { let a = r#\"quoted \" text\"#; std::fs::read(a); }",
        "fn f() { let a = '\"'; println!(); }",
    ] {
        bad(engine, body, 2, pure);
    }
    good(
        engine,
        "use std::{collections::BTreeMap, sync::Arc, time::Duration};",
    );
    good(
        engine,
        "/* tokio /* sled */ rumqttc */ fn f<'tokio>(x: &'tokio str) {}",
    );
    good(engine, "fn f() -> &'static str { \"a \\\" tokio\" }");
    good(
        "src/store/sled.rs",
        "use std::collections::HashMap;\nuse std::fs;",
    );
}

#[test]
fn clocks_are_read_in_one_file() {
    let reads = "reads a clock";
    bad(
        "src/daemon/run.rs",
        "fn f() { std::time::Instant::now(); }",
        2,
        reads,
    );
    bad(
        "src/web/mod.rs",
        "fn f() {\n    jiff::Timestamp::now();\n}",
        3,
        reads,
    );
    bad(
        "src/verdict/mod.rs",
        "fn f() { jiff::Zoned::now(); }",
        2,
        reads,
    );
    good("src/clock.rs", "fn f() { SystemTime::now(); }");
    good("src/web/mod.rs", "fn f() { sample::now(); }");
    good("src/daemon/run.rs", "fn f(clock: Clock) { clock.now(); }");
    good(
        "src/engine/mod.rs",
        "fn handle(now: Time) { let then = now; }",
    );
}

#[test]
fn files_say_what_they_are_for_and_stay_short() {
    let all = faults("src/web/mod.rs", "use std::fmt;\n");
    assert_eq!(all.len(), 1);
    assert!(
        all[0]
            .to_string()
            .starts_with("src/web/mod.rs:1: opens without")
    );
    good("src/web/mod.rs", &"\n".repeat(499));
    bad("src/web/mod.rs", &"\n".repeat(500), 501, "501 lines");
}

#[test]
fn nothing_is_left_for_later() {
    let mark = concat!("TO", "DO");
    bad("src/web/mod.rs", &format!("// {mark}: later"), 2, mark);
    bad("tests/x.rs", &format!("\n// a {mark}"), 3, mark);
    // Put together here, so that whoever searches the tree for such marks finds none.
    for mark in [concat!("to", "do!"), concat!("un", "implemented!")] {
        bad("src/web/mod.rs", &format!("fn f() {{ {mark}() }}"), 2, mark);
    }
    let skip = concat!("ign", "ore");
    for attribute in [format!("#[{skip}]"), format!("#[{skip} = \"slow\"]")] {
        let test = format!("#[test]\n{attribute}\nfn f() {{}}");
        bad("tests/x.rs", &test, 3, &format!("#[{skip}]"));
    }
    bad(
        "tests/x.rs",
        "#[should_panic(expected = \"x\")]",
        2,
        "#[should_panic]",
    );
    good(
        "src/web/mod.rs",
        "fn ignore(todo: u8) -> bool { todo != 0 }",
    );
}

#[test]
fn lints_are_switched_off_with_a_reason() {
    bad(
        "src/web/mod.rs",
        "#[allow(dead_code)]\nfn f() {}",
        2,
        "without `reason`",
    );
    bad(
        "src/web/mod.rs",
        "#![expect(\n    dead_code\n)]",
        2,
        "without `reason`",
    );
    good(
        "src/web/mod.rs",
        "#[allow(dead_code, reason = \"used by one feature\")]\nfn f() {}",
    );
    good(
        "src/web/mod.rs",
        "fn f(x: Option<u8>) { x.expect(\"checked above\"); }",
    );
}
