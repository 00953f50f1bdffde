//! `evenrow explain`: what it tells can be repeated by hand, and it is the same from the store and from the
//! running daemon.

#[path = "common/line.rs"]
mod line;
#[path = "common/running.rs"]
mod running;

use std::fs;
use std::io::{Read as _, Write as _};
use std::net::TcpStream;
use std::path::Path;
use std::process::{Command, Output};
use std::sync::Arc;
use std::time::Duration;

use evenrow::engine::{
    Command as Ask, Effect, Engine, Event, Evidence, Outcome, Plant, Record, Ticket,
};
use evenrow::model::{Bank, BankIx, Measurement, Time, Value};
use evenrow::settings::{self, Settings};
use evenrow::store::{self, Batch, Store as _};
use evenrow::web::wire::{ExplanationBody, SpanBody};

use line::{Line, bank, even};
use running::{Running, free_port, wait_for};

/// What a look taken now rests on.
fn evidence_now(engine: &mut Engine, now: Time) -> Evidence {
    let ask = Event::Command {
        ticket: Ticket(1),
        who: "test".into(),
        what: Ask::Evidence { bank: BankIx(0) },
    };
    let answers = engine.handle(ask, now).into_iter().filter_map(|e| match e {
        Effect::Answer {
            outcome: Outcome::Evidence(evidence),
            ..
        } => Some(*evidence),
        _ => None,
    });
    answers.last().expect("an answer")
}

/// A figure on the way to a test's result.
fn figure(span: &SpanBody, test: &str, what: &str) -> f64 {
    let found = span.tests.iter().find(|t| t.test == test);
    let test = found.unwrap_or_else(|| panic!("{test} is there"));
    let step = test.steps.iter().find(|s| s.what == what);
    let known: Vec<&str> = test.steps.iter().map(|s| s.what.as_str()).collect();
    step.and_then(|s| s.value)
        .unwrap_or_else(|| panic!("{what} is not in {known:?}"))
}

#[track_caller]
fn near(found: f64, wanted: f64, relative: f64) {
    assert!(
        (found - wanted).abs() <= relative * wanted.abs(),
        "{found}, not {wanted}"
    );
}

/// The values that count, of each source, by the CSV beside the explanation.
fn columns(explained: &ExplanationBody) -> Vec<(String, Vec<f64>)> {
    let text = explained.values_csv.as_ref().expect("values");
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    let mut all: Vec<(String, Vec<f64>)> = Vec::new();
    for row in reader.records() {
        let row = row.expect("a row");
        if &row[5] != "yes" {
            continue;
        }
        if all.last().is_none_or(|(source, _)| *source != row[0]) {
            all.push((row[0].to_owned(), Vec::new()));
        }
        let value: f64 = row[3].parse().expect("a number");
        all.last_mut().expect("just there").1.push(value);
    }
    all
}

fn mean(of: &[f64]) -> f64 {
    of.iter().sum::<f64>() / of.len() as f64
}

/// F of a one-way analysis, straight from the definition.
fn one_way_f(groups: &[Vec<f64>]) -> (f64, f64, f64) {
    let all: Vec<f64> = groups.iter().flatten().copied().collect();
    let centre = mean(&all);
    let between: f64 = groups
        .iter()
        .map(|g| g.len() as f64 * (mean(g) - centre).powi(2))
        .sum();
    let within: f64 = groups
        .iter()
        .flat_map(|g| g.iter().map(move |v| (v - mean(g)).powi(2)))
        .sum();
    let (k, n) = (groups.len() as f64, all.len() as f64);
    (between, within, between / (k - 1.0) / (within / (n - k)))
}

fn median(of: &[f64]) -> f64 {
    let mut sorted = of.to_vec();
    sorted.sort_by(f64::total_cmp);
    let n = sorted.len();
    0.5 * (sorted[(n - 1) / 2] + sorted[n / 2])
}

#[test]
fn the_handbooks_gears_are_taken_apart() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/fixtures");
    let settings = settings::load(&root.join("gear-diameters.toml"), []).expect("good");
    let mut engine = Engine::new(plant(&settings), settings.banks.clone());
    let mut reader = csv::Reader::from_path(root.join("gear-diameters.csv")).expect("there");
    let mut now = Time::default();
    for row in reader.records() {
        let row = row.expect("a row");
        now = Time::parse_rfc3339(&row[0]).expect("a time");
        let one = Measurement {
            bank: BankIx(0),
            source: row[1].into(),
            value: Value::parse(&row[2]).expect("a value"),
            taken: Some(now),
            cycle: None,
        };
        engine.handle(Event::Measurements(vec![one]), now);
    }
    let explained = ExplanationBody::of_evidence(&evidence_now(&mut engine, now), None);
    assert_eq!(explained.agrees, Some(true));
    let span = explained.spans.first().expect("one span");
    // NIST/SEMATECH e-Handbook 1.3.5.10 (Levene about the median) and 1.3.5.4 (one-way ANOVA).
    assert_eq!(
        format!("{:.4}", figure(span, "brown_forsythe", "statistic")),
        "1.7059"
    );
    assert_eq!(
        format!("{:.4}", figure(span, "anova", "statistic")),
        "2.2969"
    );
    let groups: Vec<Vec<f64>> = columns(&explained).into_iter().map(|(_, g)| g).collect();
    assert_eq!(groups.len(), 10);
    let (between, within, f) = one_way_f(&groups);
    near(
        figure(span, "anova", "sum of squares between sources"),
        between,
        1e-9,
    );
    near(
        figure(span, "anova", "sum of squares within sources"),
        within,
        1e-9,
    );
    near(figure(span, "anova", "statistic"), f, 1e-9);
    let sizes: Vec<Vec<f64>> = groups
        .iter()
        .map(|g| g.iter().map(|v| (v - median(g)).abs()).collect())
        .collect();
    let (between, within, f) = one_way_f(&sizes);
    near(
        figure(span, "brown_forsythe", "sum of squares between these"),
        between,
        1e-9,
    );
    near(
        figure(span, "brown_forsythe", "sum of squares within these"),
        within,
        1e-9,
    );
    near(figure(span, "brown_forsythe", "statistic"), f, 1e-9);
}

fn plant(settings: &Settings) -> Plant {
    Plant {
        name: settings.plant.name.clone(),
        zone: settings.plant.zone.clone(),
        pages: settings.pages(),
        routes: Vec::new(),
        manners: evenrow::notice::Manners::default(),
    }
}

/// A line on which head 07 went low by 2 g, up to the notice; with its evidence.
fn called(learn: i64) -> (Line, Evidence) {
    let usual = bank(12);
    let mut line = Line::new(
        Bank {
            spans: vec![10, 40, 160],
            ..usual
        },
        3,
    );
    line.run(learn, even);
    assert!(line.raised().is_empty());
    for _ in 0..200 {
        line.run(1, |s, _| (if s == 7 { -2.0 } else { 0.0 }, 1.0));
        let kept = line.effects.iter().find_map(|e| match e {
            Effect::Keep(Record::Evidence { evidence, .. }) => Some((**evidence).clone()),
            _ => None,
        });
        if let Some(evidence) = kept {
            return (line, evidence);
        }
    }
    panic!("no notice was raised");
}

#[test]
fn a_call_can_be_repeated_by_hand() {
    let (line, evidence) = called(700);
    let id = line.raised()[0].clone();
    let explained = ExplanationBody::of_evidence(&evidence, Some(&id));
    assert_eq!(explained.agrees, Some(true));
    assert_eq!(explained.decides.as_deref(), Some("watch"));
    let watch = explained.watch.as_ref().expect("it has learnt");
    let called = watch.called.as_ref().expect("it called");
    let part = watch
        .parts
        .iter()
        .find(|p| p.part == *called)
        .expect("told");
    assert!(part.statistic > part.threshold, "{part:?}");
    assert!(part.share.is_some() && part.formula.is_some(), "{part:?}");
    assert!(watch.earliest <= watch.since && watch.since <= watch.latest);
    // Two-way analysis without interaction, from the definition: cycle and source means taken off.
    let span = explained.spans.last().expect("the longest");
    assert_eq!(span.span, 160);
    let all = columns(&explained);
    let table: Vec<Vec<f64>> = all
        .iter()
        .map(|(_, g)| g[g.len() - 160..].to_vec())
        .collect();
    let k = table.len();
    let cycle_means: Vec<f64> = (0..160)
        .map(|c| table.iter().map(|g| g[c]).sum::<f64>() / k as f64)
        .collect();
    let centred: Vec<Vec<f64>> = table
        .iter()
        .map(|g| g.iter().zip(&cycle_means).map(|(v, m)| v - m).collect())
        .collect();
    let (between, within, _) = one_way_f(&centred);
    let df = (159 * (k - 1)) as f64;
    let f = between / (k - 1) as f64 / (within / df);
    near(
        figure(span, "blocked_anova", "sum of squares of the sources"),
        between,
        1e-7,
    );
    near(
        figure(span, "blocked_anova", "sum of squares of the residuals"),
        within,
        1e-7,
    );
    near(figure(span, "blocked_anova", "statistic"), f, 1e-7);
    near(
        figure(span, "blocked_anova", "degrees of freedom 2"),
        df,
        0.0,
    );
    let factor = figure(span, "blocked_anova", "factor paid for dependence");
    near(
        figure(span, "blocked_anova", "F after dependence is paid"),
        f / factor,
        1e-7,
    );
    // Whoever has the lowest mean by hand is the lowest told.
    let lowest = centred
        .iter()
        .enumerate()
        .min_by(|a, b| mean(a.1).total_cmp(&mean(b.1)))
        .map(|(s, _)| all[s].0.clone());
    assert_eq!(span.order.first().map(|p| p.source.clone()), lowest);
    // Named on the values since the start, by the same steps.
    let call = explained.call.as_ref().expect("the watch called");
    assert_eq!(call.named, ["07"]);
    let values = call.since.span;
    let since: Vec<f64> = centred.iter().map(|g| mean(&g[160 - values..])).collect();
    let centre = mean(&since);
    let told = call.since.order.first().expect("somebody is lowest");
    assert_eq!((told.source.as_str(), told.even), ("07", false));
    let next = call.since.order.last().expect("somebody is highest");
    let by_hand = since.iter().copied().fold(f64::NEG_INFINITY, f64::max) - since[6];
    let told = next.mean.expect("a mean") - told.mean.expect("a mean");
    assert!(
        (told - by_hand).abs() < 1e-9,
        "{told}, not {by_hand} about {centre}"
    );
}

#[test]
fn while_it_learns_the_look_calls_and_is_told_so() {
    let (_, evidence) = called(300);
    let explained = ExplanationBody::of_evidence(&evidence, None);
    assert_eq!(explained.agrees, Some(true));
    assert_eq!(explained.decides.as_deref(), Some("look"));
    let apart = explained.spans.iter().find(|s| s.finding == "level_apart");
    let apart = apart.expect("a look called");
    assert!(figure(apart, "blocked_anova", "p that decides") < apart.alpha_level);
    let clearest = apart.pairs.first().expect("a pair beyond the margin");
    assert_eq!(clearest.below, "07");
    // The simultaneous interval at the look's own level excludes the margin.
    assert!(clearest.low > Some(clearest.margin), "{clearest:?}");
}

#[test]
fn what_was_changed_afterwards_is_noticed() {
    let (_, mut evidence) = called(300);
    evidence.windows[4].values[5].offset += 0.1;
    let explained = ExplanationBody::of_evidence(&evidence, None);
    assert_eq!(explained.agrees, Some(false));
}

/// A plant's folder with a store that holds the story, and its configuration.
fn kept(folder: &Path, port: u16) -> Settings {
    let config = format!(
        r#"
[plant]
name = "Quayside"
time_zone = "Europe/Lisbon"
[broker]
url = "mqtt://127.0.0.1:{}"
[store]
folder = "{}"
[web]
listen = "127.0.0.1:{port}"
[[bank]]
name = "filler-2"
unit = "g"
topic = "quayside/{{source}}"
payload = {{ form = "json", value = "/v", cycle = "/n" }}
sources = ["01", "02", "03", "04", "05", "06", "07", "08", "09", "10", "11", "12"]
pairing = "cycle"
spans = [10, 40, 160]
margin = 0.5
false_calls = "1 per 90 days"
"#,
        free_port(),
        folder.join("store").display()
    );
    let file = folder.join("evenrow.toml");
    fs::write(&file, config).expect("written");
    let settings = settings::load(&file, []).expect("good");
    let (line, _) = called(300);
    let names = [settings.banks[0].name.clone()];
    let mut opened = store::open(&settings.store, &names, line.now()).expect("a new store");
    // Turns, checkpoints and the outbox are the daemon's; what explains is the rest.
    let records = line.effects.into_iter().filter_map(|e| match e {
        Effect::Keep(r @ (Record::Look(_) | Record::Notice(_) | Record::Evidence { .. })) => {
            Some(r)
        }
        _ => None,
    });
    let batch = Batch {
        records: records.collect(),
        unacknowledged: Vec::new(),
    };
    opened.store.commit(&batch).expect("kept");
    settings
}

fn explain(folder: &Path, more: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_evenrow"))
        .args(["explain", "--config"])
        .arg(folder.join("evenrow.toml"))
        .args(more)
        .output()
        .expect("the program starts")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).expect("UTF-8")
}

fn answers(port: u16) -> Option<()> {
    let mut stream = TcpStream::connect(("127.0.0.1", port)).ok()?;
    stream.set_read_timeout(Some(Duration::from_secs(5))).ok()?;
    stream
        .write_all(b"GET /health/live HTTP/1.1\r\nhost: here\r\nconnection: close\r\n\r\n")
        .ok()?;
    let mut answer = String::new();
    stream.read_to_string(&mut answer).ok()?;
    answer.starts_with("HTTP/1.1 200").then_some(())
}

#[test]
fn store_and_daemon_explain_alike() {
    let folder = tempfile::tempdir().expect("a folder");
    let port = free_port();
    let settings = Arc::new(kept(folder.path(), port));
    let csv = folder.path().join("values.csv");
    let by_store = explain(
        folder.path(),
        &["filler-2", "--csv", &csv.display().to_string()],
    );
    let told = text(&by_store.stdout);
    assert_eq!(
        by_store.status.code(),
        Some(0),
        "{}",
        text(&by_store.stderr)
    );
    for part in [
        "agrees to the last bit",
        "notice filler-2-2026-0001",
        "blocked ANOVA",
        "07 ",
    ] {
        assert!(told.contains(part), "{part}: {told}");
    }
    let values = fs::read_to_string(&csv).expect("written");
    assert!(
        values.starts_with("source,cycle,taken,value,offset,counts\n01,"),
        "{values:.80}"
    );
    let early = ["filler-2", "--at", "2020-01-01T00:00:00Z"];
    for (more, code, words) in [
        (&["no-such-bank"][..], 2, "no bank 'no-such-bank'"),
        (
            &["filler-2", "--at", "yesterday"],
            2,
            "2026-03-01T06:00:00Z",
        ),
        (
            &["filler-2", "--notice", "filler-2-1999-0001"],
            1,
            "filler-2-1999-0001",
        ),
        (&early, 1, "nothing was kept"),
    ] {
        let output = explain(folder.path(), more);
        let said = text(&output.stderr);
        assert_eq!(output.status.code(), Some(code), "{more:?}: {said}");
        assert!(said.contains(words), "{more:?}: {said}");
    }
    assert_eq!(settings.web.listen.port(), port);
    let mut daemon = Running::start(
        Command::new(env!("CARGO_BIN_EXE_evenrow"))
            .args(["watch", "--config"])
            .arg(folder.path().join("evenrow.toml")),
    );
    wait_for(Duration::from_secs(30), "the daemon", || answers(port));
    let by_daemon = explain(folder.path(), &["filler-2"]);
    assert_eq!(
        by_daemon.status.code(),
        Some(0),
        "{}",
        text(&by_daemon.stderr)
    );
    let same = text(&by_daemon.stdout) == told;
    assert!(same, "to the last digit:\n{}", text(&by_daemon.stdout));
    daemon.signal("TERM");
    daemon.wait(Duration::from_secs(10));
}
