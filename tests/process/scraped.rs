//! A real Prometheus scrapes the daemon, answers a query for the active notice, and raises the
//! shipped alert for exactly the source that is named.

use std::fs;
use std::io::Write;
use std::path::Path;
use std::process::{Command, Stdio};

use serde_json::Value;

use crate::common::mosquitto::Mosquitto;
use crate::common::running::{Running, free_port, wait_for};
use crate::daemon::{Daemon, Plant, SOON, Wanted};
use crate::http;
use crate::line::{Line, Off};

/// Starts Prometheus with the shipped rules, scraping once a second.
fn prometheus(folder: &Path, port: u16, daemon: &Daemon) -> Running {
    let rules = Path::new(env!("CARGO_MANIFEST_DIR")).join("deploy/prometheus/rules.yml");
    let config = format!(
        "global:\n  scrape_interval: 1s\n  evaluation_interval: 1s\nrule_files:\n  - {}\n\
         scrape_configs:\n  - job_name: evenrow\n    static_configs:\n      - targets: [\"{}\"]\n",
        rules.display(),
        daemon.target()
    );
    let file = folder.join("prometheus.yml");
    fs::write(&file, config).expect("the configuration is written");
    let mut command = Command::new("prometheus");
    command
        .arg(format!("--config.file={}", file.display()))
        .arg(format!(
            "--storage.tsdb.path={}",
            folder.join("data").display()
        ))
        .arg(format!("--web.listen-address=127.0.0.1:{port}"));
    Running::start(&mut command)
}

/// The answer to a query, once there is one.
#[track_caller]
fn ask(port: u16, query: &str) -> Vec<Value> {
    wait_for(SOON * 2, query, || {
        let encoded: String = query.bytes().map(|b| format!("%{b:02X}")).collect();
        let address = format!("http://127.0.0.1:{port}/api/v1/query?query={encoded}");
        let answer = http::get(&address).ok().filter(|a| a.status == 200)?.json();
        let result = answer["data"]["result"].as_array()?.clone();
        (!result.is_empty()).then_some(result)
    })
}

#[test]
fn prometheus_answers_for_the_active_notice_and_alerts_for_the_source() {
    let broker = Mosquitto::start();
    let plant = Plant::new(broker.port(), &Wanted::default());
    let daemon = plant.start_ready();
    let port = free_port();
    let folder = tempfile::tempdir().expect("a folder can be made");
    let _prometheus = prometheus(folder.path(), port, &daemon);
    ask(port, "up{job=\"evenrow\"} == 1");
    ask(
        port,
        "evenrow_notice_active{bank=\"filler-2\",kind=\"level_apart\"} == 0",
    );

    let mut line = Line::new();
    line.publish(&broker, 100, &[Off { head: 6, by: 2.5 }]);
    let active = ask(port, "evenrow_notice_active{bank=\"filler-2\"} > 0");
    assert_eq!(active.len(), 1, "{active:?}");
    assert_eq!(active[0]["metric"]["kind"], "level_apart");
    let alerts = ask(
        port,
        "ALERTS{alertname=\"EvenrowSourceApart\",alertstate=\"firing\"}",
    );
    assert_eq!(alerts.len(), 1, "{alerts:?}");
    assert_eq!(alerts[0]["metric"]["source"], "06");
    assert_eq!(alerts[0]["metric"]["bank"], "filler-2");
    for (series, least) in [
        ("evenrow_measurements_total{outcome=\"accepted\"}", 800.0),
        ("evenrow_window_values{source=\"06\"}", 80.0),
        (
            "evenrow_source_named{source=\"06\",kind=\"level_apart\"}",
            1.0,
        ),
        ("evenrow_source_deviation_sigmas{source=\"06\"}", 1.0),
        (
            "evenrow_source_last_measurement_timestamp_seconds{source=\"06\"}",
            1e9,
        ),
        ("evenrow_look_p{kind=\"level\",span=\"80\"}", 0.0),
        ("evenrow_look_f{kind=\"level\",span=\"80\"}", 0.0),
        ("evenrow_look_alpha{kind=\"level\",span=\"80\"}", 0.0),
        ("evenrow_look_seconds_count", 1.0),
        ("evenrow_notices_total{kind=\"level_apart\"}", 1.0),
        ("evenrow_broker_connected", 1.0),
        ("evenrow_store_commit_seconds_count", 1.0),
        ("evenrow_build_info", 1.0),
    ] {
        let found = ask(port, series);
        let value = found[0]["value"][1]
            .as_str()
            .and_then(|v| v.parse::<f64>().ok());
        assert!(value.is_some_and(|v| v >= least), "{series}: {found:?}");
    }

    // The names and help texts are as Prometheus's own checker wants them.
    let text = daemon.ask("/metrics").expect("the metrics").text;
    let mut check = Command::new("promtool")
        .args(["check", "metrics"])
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("promtool is missing; tests/all installs it");
    check
        .stdin
        .take()
        .expect("it was piped")
        .write_all(text.as_bytes())
        .expect("promtool reads");
    let said = check.wait_with_output().expect("its end can be waited for");
    let words = String::from_utf8_lossy(&said.stderr).into_owned();
    assert!(
        said.status.success() && words.trim().is_empty(),
        "promtool: {words}"
    );
    daemon.end(&[]);
}
