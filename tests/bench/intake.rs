//! How fast the daemon takes measurements in, beside a bare subscriber that discards them, in the same
//! run on the same broker; and how much memory and processor time that takes.
//!
//!   cargo bench --bench intake [MESSAGES]
//!
//! A preloaded persistent session of each is drained in turn: QoS 1, MQTT 5 with 1000 messages under way,
//! JSON of about 60 bytes, 60 sources that share cycles, with windows, looks, page and metrics on. Three
//! repetitions; the median is told.

#[path = "../common/mod.rs"]
mod common;

use std::fs;
use std::process::Command;
use std::time::{Duration, Instant, SystemTime, UNIX_EPOCH};

use common::mosquitto::Mosquitto;
use common::running::{Running, free_port, wait_for};
use rumqttc::v5::mqttbytes::QoS;
use rumqttc::v5::mqttbytes::v5::{ConnectProperties, Packet};
use rumqttc::v5::{AsyncClient, Event, EventLoop, MqttOptions};

const SOURCES: usize = 60;
const REPETITIONS: usize = 3;
const TOPIC: &str = "quayside/filler/net";
const SOON: Duration = Duration::from_secs(120);

fn main() {
    let asked = std::env::args().find_map(|a| a.parse().ok());
    let messages: usize = asked.unwrap_or(150_000);
    let runtime = tokio::runtime::Runtime::new().expect("a runtime");
    let broker = Mosquitto::start();
    let folder = tempfile::tempdir().expect("a folder");
    let port = free_port();
    let config = configuration(folder.path().display().to_string(), broker.port(), port);
    let file = folder.path().join("evenrow.toml");
    fs::write(&file, config).expect("the configuration is written");
    let evenrow = || {
        let mut command = Command::new(env!("CARGO_BIN_EXE_evenrow"));
        Running::start(command.arg("watch").arg("--config").arg(&file))
    };

    // Both sessions exist before anything is published, so that both get every message.
    runtime.block_on(begin_session(broker.port()));
    let daemon = evenrow();
    ready(port);
    end(daemon);

    let mut ratios = Vec::new();
    let mut rates = Vec::new();
    let mut costs = Vec::new();
    let mut memory = 0;
    let mut line = Line::new();
    for repetition in 1..=REPETITIONS {
        // The stock client sends without waiting, and the broker drops one that sends much more at once.
        for batch in line.messages(messages).chunks(10_000) {
            broker.publish_lines(TOPIC, batch);
        }
        let bare = runtime.block_on(drain_bare(broker.port(), messages));
        let started = Instant::now();
        let daemon = evenrow();
        let (took, cpu_s, resident_kb) = drain_daemon(&daemon, port, messages);
        let whole = started.elapsed();
        end(daemon);
        let (own, other) = (
            messages as f64 / took.as_secs_f64(),
            messages as f64 / bare.as_secs_f64(),
        );
        println!(
            "repetition {repetition}: bare {other:.0}/s, evenrow {own:.0}/s (from its start {:.1} s), ratio {:.2}, {:.1} us of processor a measurement, {resident_kb} kB resident",
            whole.as_secs_f64(),
            own / other,
            1e6 * cpu_s / messages as f64
        );
        ratios.push(own / other);
        rates.push(own);
        costs.push(1e6 * cpu_s / messages as f64);
        memory = memory.max(resident_kb);
    }
    println!(
        "median of {REPETITIONS}: {:.0} measurements/s, ratio {:.2}, {:.1} us of processor a measurement; {memory} kB resident with {SOURCES} sources of 640 values",
        median(&mut rates),
        median(&mut ratios),
        median(&mut costs)
    );
}

fn median(values: &mut [f64]) -> f64 {
    values.sort_by(f64::total_cmp);
    values[values.len() / 2]
}

fn configuration(folder: String, broker: u16, port: u16) -> String {
    let sources: Vec<String> = (1..=SOURCES).map(|s| format!("\"{s:02}\"")).collect();
    format!(
        r#"
[plant]
name = "Quayside"
time_zone = "Europe/Lisbon"
[broker]
url = "mqtt://127.0.0.1:{broker}"
client_id = "evenrow-bench"
[store]
folder = "{folder}/store"
[web]
listen = "127.0.0.1:{port}"
[[bank]]
name = "filler"
unit = "g"
resolution = 0.1
target = 503.0
topic = "{TOPIC}"
payload = {{ form = "json", value = "/v", source = "/s", time = "/t", cycle = "/n" }}
sources = [{}]
pairing = "cycle"
margin = 0.8
false_calls = "1 per 90 days"
"#,
        sources.join(", ")
    )
}

/// A line that never stops counting.
struct Line {
    cycle: i64,
    first_ms: i64,
    state: u64,
}

impl Line {
    fn new() -> Self {
        let now = SystemTime::now()
            .duration_since(UNIX_EPOCH)
            .expect("after 1970");
        Self {
            cycle: 0,
            first_ms: now.as_millis() as i64 - 86_400_000,
            state: 0x2545_F491_4F6C_DD1D,
        }
    }

    fn messages(&mut self, count: usize) -> Vec<String> {
        let mut all = Vec::with_capacity(count);
        while all.len() < count {
            self.cycle += 1;
            let taken = self.first_ms + 1000 * self.cycle;
            for s in 1..=SOURCES.min(count - all.len()) {
                self.state = self
                    .state
                    .wrapping_mul(6_364_136_223_846_793_005)
                    .wrapping_add(1_442_695_040_888_963_407);
                let tenths = 5000 + (self.state >> 33) % 60;
                let (whole, part) = (tenths / 10, tenths % 10);
                all.push(format!(
                    r#"{{"v":{whole}.{part},"s":"{s:02}","t":{taken},"n":{}}}"#,
                    self.cycle
                ));
            }
        }
        all
    }
}

fn bare_client(port: u16) -> (AsyncClient, EventLoop) {
    let mut options = MqttOptions::new("bare", "127.0.0.1", port);
    options.set_clean_start(false);
    options.set_keep_alive(Duration::from_secs(30));
    options.set_connect_properties(ConnectProperties {
        session_expiry_interval: Some(86_400),
        receive_maximum: Some(1000),
        ..ConnectProperties::new()
    });
    AsyncClient::new(options, 1000)
}

async fn begin_session(port: u16) {
    let (client, mut events) = bare_client(port);
    client
        .subscribe(TOPIC, QoS::AtLeastOnce)
        .await
        .expect("asked");
    // The connection ends with an error once the broker has closed it, as was asked for.
    while let Ok(event) = events.poll().await {
        if let Event::Incoming(Packet::SubAck(_)) = event {
            client.disconnect().await.expect("asked");
        }
    }
}

/// Time from the first message of a preloaded session to the last, all acknowledged.
async fn drain_bare(port: u16, messages: usize) -> Duration {
    let (client, mut events) = bare_client(port);
    let mut first = None;
    let mut seen = 0;
    while seen < messages {
        let next = tokio::time::timeout(SOON, events.poll()).await;
        let event = next.expect("the broker has kept every message");
        if let Event::Incoming(Packet::Publish(_)) = event.expect("the broker answers") {
            first.get_or_insert_with(Instant::now);
            seen += 1;
        }
    }
    let took = first.expect("something came").elapsed();
    client.disconnect().await.expect("asked");
    while events.poll().await.is_ok() {}
    took
}

fn text(port: u16, path: &str) -> Option<String> {
    let answer = ureq::get(&format!("http://127.0.0.1:{port}{path}")).call();
    answer.ok()?.body_mut().read_to_string().ok()
}

fn ready(port: u16) {
    wait_for(SOON, "the daemon to be ready", || {
        text(port, "/health/ready")
    });
}

fn accepted(port: u16) -> Option<usize> {
    let metrics = text(port, "/metrics")?;
    let counted = metrics.lines().filter(|l| {
        l.starts_with("evenrow_measurements_total") && l.contains("\"accepted\"")
            || l.contains("\"late\"")
    });
    Some(
        counted
            .filter_map(|l| l.rsplit(' ').next()?.parse::<f64>().ok())
            .sum::<f64>() as usize,
    )
}

/// (time from the first taken to the last, processor seconds, resident kB).
fn drain_daemon(daemon: &Running, port: u16, messages: usize) -> (Duration, f64, u64) {
    let begun = wait_for(SOON, "the first measurement", || {
        accepted(port)
            .filter(|n| *n > 0)
            .map(|n| (n, Instant::now()))
    });
    wait_for(SOON, "the last measurement", || {
        accepted(port).filter(|n| *n >= messages)
    });
    let took = begun.1.elapsed();
    // What was there when the clock started is not counted.
    let share = (messages - begun.0.min(messages - 1)) as f64 / messages as f64;
    (
        took.div_f64(share),
        processor_s(daemon.id()),
        resident_kb(daemon.id()),
    )
}

fn end(mut daemon: Running) {
    daemon.signal("TERM");
    daemon.wait(Duration::from_secs(10));
}

/// Processor time of a process: fields 14 and 15 of /proc/PID/stat, in hundredths of a second (proc(5)).
fn processor_s(id: u32) -> f64 {
    let stat = fs::read_to_string(format!("/proc/{id}/stat")).expect("it runs");
    let after_name = stat.rsplit(')').next().unwrap_or_default();
    let field = |n: usize| {
        after_name
            .split_whitespace()
            .nth(n)
            .and_then(|f| f.parse::<f64>().ok())
    };
    (field(11).unwrap_or(0.0) + field(12).unwrap_or(0.0)) / 100.0
}

fn resident_kb(id: u32) -> u64 {
    let status = fs::read_to_string(format!("/proc/{id}/status")).expect("it runs");
    let line = status.lines().find_map(|l| l.strip_prefix("VmRSS:"));
    line.and_then(|l| l.split_whitespace().next()?.parse().ok())
        .unwrap_or(0)
}
