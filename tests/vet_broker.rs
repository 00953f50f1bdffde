//! `evenrow vet --broker` against a real Mosquitto: what it hears, what it would refuse, what it proposes,
//! and that it leaves no trace.

mod common;

use std::process::{Command, Output};
use std::time::{Duration, SystemTime, UNIX_EPOCH};

use common::mosquitto::Mosquitto;

const HEAD: &str = "[plant]\nname = \"Quayside\"\ntime_zone = \"Europe/Lisbon\"\n\
                    [store]\nfolder = \"unused\"\n";

fn bank(port: u16, protocol: u8) -> String {
    format!(
        "{HEAD}[broker]\nurl = \"mqtt://127.0.0.1:{port}\"\nprotocol = {protocol}\n\
         [[bank]]\nname = \"line\"\nunit = \"g\"\ntopic = \"quayside/line/{{source}}\"\npayload = \"number\"\n\
         sources = [\"01\", \"02\", \"04\"]\npairing = \"none\"\nmargin = 1\nplausible = {{ upper = 600 }}\n\
         false_calls = \"1 per 90 days\"\n"
    )
}

fn now_ms() -> u128 {
    let since = SystemTime::now()
        .duration_since(UNIX_EPOCH)
        .expect("after 1970");
    since.as_millis()
}

/// Runs the command while the plant goes on publishing.
fn overheard(mosquitto: &Mosquitto, config: &str, more: &[&str]) -> Output {
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("evenrow.toml");
    std::fs::write(&path, config).expect("the file can be written");
    let mut command = Command::new(env!("CARGO_BIN_EXE_evenrow"));
    command
        .arg("vet")
        .arg("--config")
        .arg(&path)
        .args(["--broker", "--listen", "6s"])
        .args(more);
    let run = std::thread::spawn(move || command.output().expect("the program starts"));
    let mut cycle = 0;
    while !run.is_finished() {
        cycle += 1;
        for head in 1..=3 {
            let value = 500.0 + f64::from(head) + f64::from((cycle * 7 + head * 3) % 5) / 10.0;
            mosquitto.publish(
                &format!("quayside/line/0{head}"),
                format!("{value:.1}").as_bytes(),
                &[],
            );
            let scale = format!(
                "{{\"q\": {{\"w\": {value:.2}}}, \"at\": {}, \"n\": {cycle}}}",
                now_ms()
            );
            mosquitto.publish(
                &format!("quayside/scale{}/w", 11 - head),
                scale.as_bytes(),
                &[],
            );
            let spindle = format!("{{\"s\": \"S{head}\", \"d\": {value:.3}}}");
            mosquitto.publish("quayside/spindles", spindle.as_bytes(), &[]);
        }
        mosquitto.publish("quayside/line/01", b"999", &[]);
        mosquitto.publish("quayside/line/02", b"n/a", &[]);
        std::thread::sleep(Duration::from_millis(50));
    }
    run.join().expect("it was waited for")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8_lossy(bytes).into_owned()
}

#[test]
fn people_are_told_what_is_heard() {
    for protocol in [5, 4] {
        let mosquitto = Mosquitto::start();
        let everything = mosquitto.listen("#");
        mosquitto.publish("quayside/line/04", b"503.0", &["-r"]);
        let output = overheard(&mosquitto, &bank(mosquitto.port(), protocol), &[]);
        let (out, err) = (text(&output.stdout), text(&output.stderr));
        assert_eq!(output.status.code(), Some(0), "{out}\n{err}");
        let mut words = vec![
            "bank line",
            "match quayside/line/{source}",
            "of 2 sources",
            "01, 02",
            "as implausible: source '01': 999 lies above 600, where `plausible` ends (quayside/line/01)",
            "as not_a_number: 'n/a' is no number",
            "as unknown_source: source \"03\" is not one of those listed",
            "listed and not heard: 04",
            "topics of no bank",
            "quayside/scale8/w",
            "proposal line, from quayside/line/{source}",
            "sources = [\"01\", \"02\"]",
        ];
        if protocol == 4 {
            words.push("as retained");
        }
        for word in words {
            assert!(out.contains(word), "{word:?} is not in\n{out}");
        }
        let written = everything
            .seen()
            .into_iter()
            .find(|seen| !seen.topic.starts_with("quayside/"));
        assert_eq!(written, None);
    }
}

#[test]
fn programs_are_told_and_every_proposal_is_good() {
    let mosquitto = Mosquitto::start();
    let output = overheard(&mosquitto, &bank(mosquitto.port(), 5), &["--json"]);
    let (out, err) = (text(&output.stdout), text(&output.stderr));
    assert_eq!(output.status.code(), Some(0), "{out}\n{err}");
    let heard: serde_json::Value = serde_json::from_str(&out).expect("one JSON object");
    assert_eq!(heard["banks"][0]["sources"][0]["source"], "01");
    assert_eq!(heard["topics_of_no_bank"].as_array().map(Vec::len), Some(4));
    let proposals = heard["proposals"].as_array().expect("a list");
    let toml = |topic: &str| {
        let found = proposals.iter().find(|proposal| proposal["topic"] == topic);
        let found = found.unwrap_or_else(|| panic!("{topic} is not in {out}"));
        found["toml"].as_str().expect("text").to_owned()
    };
    for (topic, words) in [
        (
            "quayside/line/{source}",
            &["margin = 0.1", "resolution = 0.1", "plausible = "][..],
        ),
        (
            "quayside/{source}/w",
            &[
                "sources = [\"scale8\"",
                "value = \"/q/w\", time = \"/at\", cycle = \"/n\"",
                "pairing = \"cycle\"",
            ],
        ),
        (
            "quayside/spindles",
            &[
                "value = \"/d\", source = \"/s\"",
                "sources = [\"S1\", \"S2\", \"S3\"]",
                "slot = \"",
            ],
        ),
    ] {
        let toml = toml(topic);
        for word in words {
            assert!(toml.contains(word), "{word:?} is not in\n{toml}");
        }
        vetted(&toml);
    }
}

/// What is pasted is a good configuration.
fn vetted(bank: &str) {
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("pasted.toml");
    let text = format!("{HEAD}[broker]\nurl = \"mqtt://127.0.0.1\"\n{bank}");
    std::fs::write(&path, &text).expect("the file can be written");
    let vet = Command::new(env!("CARGO_BIN_EXE_evenrow"))
        .args(["vet", "--config"])
        .arg(&path)
        .output();
    let vet = vet.expect("the program starts");
    assert!(
        vet.status.success(),
        "{text}\n{}",
        String::from_utf8_lossy(&vet.stderr)
    );
}

#[test]
fn what_goes_wrong_is_said() {
    let output = Command::new(env!("CARGO_BIN_EXE_evenrow"))
        .args([
            "vet",
            "--config",
            "config/smallest.toml",
            "--broker",
            "--listen",
            "1s",
        ])
        .env("EVENROW__BROKER__URL", "mqtt://127.0.0.1:1")
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .output()
        .expect("the program starts");
    let err = text(&output.stderr);
    assert_eq!(output.status.code(), Some(1), "{err}");
    assert!(
        err.contains("nothing listens at the broker's address"),
        "{err}"
    );
    for wrong in [
        &["--listen", "1s"][..],
        &["--json"],
        &["--broker", "--listen", "soon"],
        &["--broker", "--listen", "0s"],
    ] {
        let output = Command::new(env!("CARGO_BIN_EXE_evenrow"))
            .args(["vet", "--config", "x.toml"])
            .args(wrong)
            .output()
            .expect("the program starts");
        assert_eq!(output.status.code(), Some(2), "{wrong:?}");
    }
}
