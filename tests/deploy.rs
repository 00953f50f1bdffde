//! The files in `deploy/` do what they say: Prometheus's own checker takes the rules and their unit
//! tests, Mosquitto takes the settings, and the access list lets each user do its work and no more.

mod common;

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use common::mosquitto::Mosquitto;

fn deploy(path: &str) -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR"))
        .join("deploy")
        .join(path)
}

fn text(path: &str) -> String {
    let file = deploy(path);
    fs::read_to_string(&file).unwrap_or_else(|e| panic!("{}: {e}", file.display()))
}

fn promtool(arguments: &[&str], file: &str) -> Output {
    Command::new("promtool")
        .args(arguments)
        .arg(deploy(file))
        .output()
        .expect("promtool is missing; tests/all installs it")
}

#[test]
fn prometheus_takes_the_rules_their_tests_and_the_configuration() {
    for (arguments, file) in [
        (["check", "rules"].as_slice(), "prometheus/rules.yml"),
        (["test", "rules"].as_slice(), "prometheus/rules_test.yml"),
        (["check", "config"].as_slice(), "prometheus/prometheus.yml"),
    ] {
        let said = promtool(arguments, file);
        let words = [said.stdout, said.stderr].concat();
        assert!(
            said.status.success(),
            "{file}: {}",
            String::from_utf8_lossy(&words)
        );
    }
}

#[test]
fn every_rule_has_a_test_and_none_rests_on_p() {
    let (rules, tests) = (
        text("prometheus/rules.yml"),
        text("prometheus/rules_test.yml"),
    );
    let names = rules
        .lines()
        .filter_map(|l| l.trim().strip_prefix("- alert: "));
    let names: Vec<&str> = names.collect();
    assert!(names.len() > 5, "{names:?}");
    for name in names {
        assert!(
            tests.contains(&format!("alertname: {name}\n")),
            "{name} has no test"
        );
    }
    let code = rules.lines().filter(|l| !l.trim_start().starts_with('#'));
    for forbidden in ["look_p", "look_f", "deviation_sigmas"] {
        assert!(
            code.clone().all(|l| !l.contains(forbidden)),
            "a rule rests on {forbidden}"
        );
    }
}

/// The recommended settings with the paths of a folder of ours, and without the listener, which the
/// test brings itself.
fn recommended() -> String {
    let settings = text("mosquitto/evenrow.conf");
    let lines = settings.lines().filter(|line| {
        let own = [
            "listener ",
            "persistence",
            "autosave_interval ",
            "max_queued_messages ",
        ];
        !own.iter().any(|start| line.starts_with(start))
    });
    let settings = lines.collect::<Vec<_>>().join("\n");
    settings.replace("/etc/mosquitto/", "{folder}/")
}

fn prepared() -> Mosquitto {
    Mosquitto::start_with(&recommended(), |folder| {
        fs::copy(deploy("mosquitto/evenrow.acl"), folder.join("evenrow.acl")).expect("copied");
        let passwords = folder.join("evenrow.passwords");
        fs::write(&passwords, "").expect("the file is made");
        for user in ["evenrow", "filler2", "oncall"] {
            let made = Command::new("mosquitto_passwd")
                .arg("-b")
                .arg(&passwords)
                .args([user, "open water"])
                .status();
            assert!(
                made.is_ok_and(|s| s.success()),
                "mosquitto_passwd makes {user}"
            );
        }
    })
}

#[test]
fn the_access_list_lets_each_user_do_its_work_and_no_more() {
    let mut broker = prepared();
    let mut as_user = |user: &str| broker.clients_say(&["-u", user, "-P", "open water"]);
    as_user("evenrow");
    let daemon = broker.listen("quayside/#");
    broker.clients_say(&["-u", "oncall", "-P", "open water"]);
    let oncall = broker.listen("evenrow/#");
    let overhears = broker.listen("quayside/#");
    // Everybody listens: what comes later reaches whoever may hear it.
    std::thread::sleep(std::time::Duration::from_secs(1));

    // What nobody may say is not passed on, even by a broker that confirms it.
    broker.publish("evenrow/Quayside/status", b"by a stranger", &[]);
    broker.clients_say(&["-u", "filler2", "-P", "open water"]);
    broker.publish("quayside/filler3/head/01/net", b"not its machine", &[]);
    broker.publish("quayside/filler2/head/01/net", b"503.1", &[]);
    broker.clients_say(&["-u", "evenrow", "-P", "open water"]);
    broker.publish("evenrow/Quayside/status", b"running", &[]);
    broker.publish("quayside/filler2/head/01/net", b"made up", &[]);

    let heard = daemon.wait("a measurement", |s| s.topic.starts_with("quayside/"));
    assert_eq!(heard.payload, "503.1");
    let heard = oncall.wait("the status", |s| s.topic.starts_with("evenrow/"));
    assert_eq!(heard.payload, "running");
    std::thread::sleep(std::time::Duration::from_millis(300));
    assert_eq!(daemon.seen().len(), 1, "{:#?}", daemon.seen());
    assert_eq!(oncall.seen().len(), 1, "{:#?}", oncall.seen());
    assert!(overhears.seen().is_empty(), "{:#?}", overhears.seen());
}

#[test]
fn nobody_gets_in_without_a_password() {
    let broker = prepared();
    let refused = Command::new("mosquitto_pub")
        .args(["-h", "127.0.0.1", "-p", &broker.port().to_string()])
        .args(["-t", "evenrow/x", "-m", "hello"])
        .output()
        .expect("mosquitto-clients are missing; tests/all installs them");
    assert!(!refused.status.success());
}

#[test]
fn the_service_ends_on_what_does_not_get_better_by_trying_again() {
    let unit = text("systemd/evenrow.service");
    for line in [
        "Type=notify",
        "RestartPreventExitStatus=2 78",
        "ExecStart=/usr/local/bin/evenrow watch --config /etc/evenrow/evenrow.toml",
    ] {
        assert!(unit.lines().any(|l| l == line), "{line}");
    }
}
