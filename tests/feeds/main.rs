//! The engine on the recordings of `demo-feeds`: what was called, when, and for whom.
//!
//! The recordings are what the filler's model gives, to the digit; what the engine says of each is
//! kept as a snapshot, and what must hold is asserted beside it.

mod make;

use std::fs::File;
use std::io::{Read, Write};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use evenrow::cli::rehearse::conductor::Conductor;
use evenrow::cli::rehearse::ledger::{Ledger, Said};
use evenrow::engine::{Engine, Plant};
use evenrow::intake::recording::{self, Fault, How, Source};
use evenrow::model::Time;
use evenrow::notice::{Kind, Notice};
use evenrow::settings::{RecordingColumns, Settings};
use evenrow::verdict::{Look, Method};
use flate2::Compression;
use flate2::read::MultiGzDecoder;
use flate2::write::GzEncoder;

fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-feeds")
}

fn file(name: &str) -> PathBuf {
    folder().join(format!("{name}.csv.gz"))
}

/// What came of a recording.
struct Run {
    ledger: Ledger,
    /// Every look kept whole, in order, the last ones included.
    looks: Vec<Arc<Look>>,
    /// Every change of a notice, in order.
    changes: Vec<Arc<Notice>>,
}

fn run(name: &str) -> Run {
    let text = std::fs::read_to_string(folder().join("filler.toml")).expect("a configuration");
    let settings = Settings::parse(&text, "filler.toml", []).expect("no fault");
    let plant = Plant {
        name: settings.plant.name.clone(),
        zone: settings.plant.zone.clone(),
        pages: settings.pages(),
        routes: Vec::new(),
        manners: evenrow::notice::Manners::default(),
    };
    let how = How {
        banks: settings.banks.iter().map(|b| b.name.clone()).collect(),
        bank: None,
        columns: RecordingColumns::default(),
        beliefs: Vec::new(),
        told_by: Vec::new(),
    };
    let mut conductor = Conductor::new(Engine::new(plant, settings.banks.clone()));
    let (mut looks, mut changes) = (Vec::new(), Vec::new());
    let mut hear = |said: &Said| {
        match said {
            Said::Look(look) => looks.push(Arc::clone(look)),
            Said::Notice(notice) => changes.push(Arc::clone(notice)),
            Said::Digest(..) => {}
        }
        Ok(())
    };
    let mut ledger = Ledger::new(&[]);
    for row in recording::open(&Source::named(file(name)), &how).expect("a recording") {
        match row {
            Ok(recorded) => {
                ledger.read(&recorded);
                let told = conductor.take(recorded.measurement, &mut ledger, &mut hear);
                told.expect("nothing is written");
            }
            Err(Fault::Refused { line, refusal }) => panic!("line {line}: {}", refusal.detail),
            Err(Fault::Broken(error)) => panic!("{error}"),
        }
    }
    let told = conductor.finish(&mut ledger, &mut hear);
    told.expect("nothing is written");
    Run {
        ledger,
        looks,
        changes,
    }
}

impl Run {
    /// Short and readable: what was called when, for whom, and how it stood in the end.
    fn story(&self) -> String {
        let mut lines = Vec::new();
        let mut before: Option<Arc<Notice>> = None;
        for notice in &self.changes {
            let same = |b: &Arc<Notice>| {
                b.id == notice.id && b.state == notice.state && names(b) == names(notice)
            };
            if !before.as_ref().is_some_and(same) {
                lines.push(line(notice));
            }
            before = Some(Arc::clone(notice));
        }
        for look in &self.ledger.last_looks {
            let named = look
                .sources
                .iter()
                .filter(|s| s.named_level || s.named_spread);
            let named: Vec<&str> = named.map(|s| &*s.name).collect();
            lines.push(format!(
                "in the end, span {}: {} {}",
                look.span,
                look.finding.words(),
                named.join(" ")
            ));
        }
        for (bank, tally) in &self.ledger.banks {
            lines.push(format!(
                "{bank}: {} looks, {:?}",
                tally.looks, tally.outcomes
            ));
        }
        lines
            .iter()
            .map(|l| format!("{}\n", l.trim_end()))
            .collect()
    }

    fn raised(&self) -> Vec<&Arc<Notice>> {
        self.ledger.notices.values().collect()
    }

    fn outcome(&self, what: &str) -> u64 {
        let tally = self.ledger.banks.get("filler-2").expect("the bank");
        tally.outcomes.get(what).copied().unwrap_or(0)
    }
}

fn names(notice: &Notice) -> Vec<&str> {
    notice.sources.iter().map(|s| &*s.source).collect()
}

fn line(notice: &Notice) -> String {
    let sources = notice.sources.iter().map(|s| {
        let (source, unit) = (&s.source, &notice.unit);
        format!(
            "{source} {:+.2} ({:+.2} to {:+.2}) {unit}",
            s.deviation, s.low, s.high
        )
    });
    format!(
        "{} {} {}: {}; since {} ({} to {}), span {}",
        clock(notice.changed),
        notice.kind.word(),
        notice.state.word(),
        sources.collect::<Vec<_>>().join(", "),
        clock(notice.since.at),
        clock(notice.since.earliest),
        clock(notice.since.latest),
        notice.span
    )
}

/// The time of day, which is all that differs.
fn clock(at: Time) -> String {
    let text = at.to_string();
    text.get(11..19).unwrap_or(&text).to_owned()
}

fn at(text: &str) -> Time {
    Time::parse_rfc3339(&format!("2026-03-02T{text}Z")).expect("a time")
}

fn unpacked(path: &Path) -> String {
    let mut text = String::new();
    let file = File::open(path).expect("the recording is in demo-feeds");
    let read = MultiGzDecoder::new(file).read_to_string(&mut text);
    read.expect("gzip");
    text
}

fn write(path: &Path, text: &str) {
    let mut packed = GzEncoder::new(Vec::new(), Compression::best());
    packed.write_all(text.as_bytes()).expect("memory");
    let bytes = packed.finish().expect("memory");
    std::fs::write(path, bytes).expect("demo-feeds can be written");
}

#[test]
fn the_recordings_are_what_the_model_gives() {
    let write_them = std::env::var_os("EVENROW_WRITE_FEEDS").is_some();
    for (name, text) in make::all() {
        if write_them {
            write(&file(name), &text);
        }
        let kept = unpacked(&file(name));
        let differs = kept.lines().zip(text.lines()).position(|(a, b)| a != b);
        assert!(
            kept == text,
            "{name} differs from the model (line {differs:?}); see demo-feeds/README.md"
        );
    }
}

#[test]
fn even() {
    let run = run("even");
    assert!(run.raised().is_empty());
    assert_eq!(run.outcome("accepted"), 1_440 * 12);
    insta::assert_snapshot!(run.story());
}

#[test]
fn one_drifts() {
    let run = run("one-drifts");
    let raised = run.raised();
    assert_eq!(raised.len(), 1);
    let notice = raised[0];
    assert_eq!(notice.kind, Kind::LevelApart);
    assert_eq!(names(&run.changes[0]), ["07"]);
    assert_eq!(names(notice), ["07"]);
    assert!(notice.since.earliest <= at("07:12:00") && at("07:06:40") <= notice.since.latest);
    assert!(notice.raised > at("07:06:40") && notice.raised < at("07:20:00"));
    assert!(notice.returned.is_some_and(|back| back > at("07:50:00")));
    insta::assert_snapshot!(run.story());
}

#[test]
fn the_look_that_called_the_drift_was_blocked_and_plain_anova_is_blind() {
    let run = run("one-drifts");
    let raised = run.raised();
    let (when, span) = (raised[0].raised, raised[0].span);
    let look = run.looks.iter().find(|l| l.at == when && l.span == span);
    let look = look.expect("the look that called is kept");
    let p = |method, raw| {
        let mut tests = look.tests.iter();
        let test = tests.find(|t| t.method == method && t.raw == raw);
        test.expect("the test was computed").p
    };
    assert!(p(Method::BlockedAnova, false) < look.alpha_level);
    assert!(p(Method::Anova, true) > look.alpha_level);
}

#[test]
fn turns_erratic() {
    let run = run("turns-erratic");
    let raised = run.raised();
    assert_eq!(raised.len(), 1);
    let notice = raised[0];
    assert_eq!(notice.kind, Kind::SpreadApart);
    assert_eq!(names(&run.changes[0]), ["03"]);
    assert_eq!(names(notice), ["03"]);
    assert!(notice.raised > at("07:06:40") && notice.raised < at("07:20:00"));
    assert!(notice.returned.is_some_and(|back| back > at("07:45:00")));
    insta::assert_snapshot!(run.story());
}

#[test]
fn common_movement_only() {
    let text = unpacked(&file("common-movement-only"));
    let of_head = |row: &str| -> f64 {
        row.split(',')
            .nth(2)
            .expect("head 01")
            .parse()
            .expect("a weight")
    };
    let head: Vec<f64> = text.lines().skip(1).map(of_head).collect();
    let (low, high) = head
        .iter()
        .fold((f64::MAX, f64::MIN), |(l, h), v| (l.min(*v), h.max(*v)));
    assert!(high - low > 40.0, "one head swings by {} g", high - low);

    let run = run("common-movement-only");
    assert!(run.raised().is_empty());
    insta::assert_snapshot!(run.story());
}

#[test]
fn gaps() {
    let run = run("gaps");
    // Two heads that deliver nothing for ten minutes are said, and nobody is called apart for it.
    assert!(run.raised().iter().all(|n| n.kind == Kind::SourceSilent));
    let missing = 120 + 120 + 240 * 12 + 8;
    assert_eq!(
        run.outcome("accepted") + run.outcome("late"),
        1_440 * 12 - missing
    );
    insta::assert_snapshot!(run.story());
}

#[test]
fn late_and_double() {
    let run = run("late-and-double");
    let (late, double) = make::late_and_doubled();
    assert!(late > 50 && double > 50);
    assert_eq!(run.outcome("late"), late);
    assert_eq!(run.outcome("double"), double);
    assert_eq!(run.outcome("accepted") + late, 480 * 12);
    assert!(run.raised().is_empty());
    insta::assert_snapshot!(run.story());
}

#[test]
fn changeover() {
    let run = run("changeover");
    assert!(run.raised().is_empty());
    insta::assert_snapshot!(run.story());
}
