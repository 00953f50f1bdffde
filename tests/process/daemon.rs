//! The program under test: its configuration, its start, its log and its end.

use std::fs;
use std::path::PathBuf;
use std::process::Command;
use std::time::{Duration, Instant};

use serde_json::Value;
use tempfile::TempDir;

use crate::common::running::{Running, free_port, wait_for};
use crate::http::{self, Answer};
use crate::line::HEADS;

/// The token that may act.
pub const TOKEN: &str = "calm-water-under-the-bridge";

/// How long anything that should happen at once may take on a busy machine.
pub const SOON: Duration = Duration::from_secs(30);

/// How long the end may take.
const END: Duration = Duration::from_secs(5);

/// What a test wants to be different from the usual.
#[derive(Clone, Default)]
pub struct Wanted {
    /// Lines for `[broker]` besides the address; `url` is given when the address is special.
    pub broker: String,
    /// The broker's address, when it is not plain `mqtt://` on the loopback address.
    pub url: Option<String>,
    /// Whole sections of the configuration, such as `[[outlet]]`.
    pub sections: String,
}

/// A daemon's folder and ports, which outlive its process.
pub struct Plant {
    folder: TempDir,
    port: u16,
}

/// A running daemon.
pub struct Daemon {
    process: Running,
    port: u16,
}

impl Plant {
    /// A plant with one bank of eight heads that listens to the broker at `broker_port`.
    pub fn new(broker_port: u16, wanted: &Wanted) -> Self {
        let folder = tempfile::tempdir().expect("a folder can be made");
        let port = free_port();
        let at = |name: &str| folder.path().join(name).display().to_string();
        let url = wanted
            .url
            .clone()
            .unwrap_or_else(|| format!("mqtt://127.0.0.1:{broker_port}"));
        let config = format!(
            r#"
[plant]
name = "Quayside"
time_zone = "Europe/Lisbon"

[broker]
url = "{url}"
client_id = "evenrow-{port}"
{broker}

[store]
folder = "{store}"

[web]
listen = "127.0.0.1:{port}"
token_file = "{tokens}"

[[bank]]
name = "filler-2"
equipment = "filler 2"
characteristic = "net content"
unit = "g"
resolution = 0.1
target = 503.0
topic = "quayside/filler2/net"
payload = {{ form = "json", value = "/v", source = "/head", time = "/ts", cycle = "/n" }}
sources = ["01", "02", "03", "04", "05", "06", "07", "08"]
pairing = "cycle"
spans = [20, 80]
look_every = "1s"
margin = 0.8
false_calls = "1 per 90 days"

{sections}
"#,
            broker = wanted.broker,
            sections = wanted.sections,
            store = at("store"),
            tokens = at("tokens"),
        );
        fs::write(folder.path().join("evenrow.toml"), config)
            .expect("the configuration is written");
        let tokens = format!("{TOKEN}\nlook only-for-looking\n");
        fs::write(folder.path().join("tokens"), tokens).expect("the tokens are written");
        Self { folder, port }
    }

    /// A path in the plant's folder.
    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// Starts the daemon and waits until it says that it lives.
    pub fn start(&self) -> Daemon {
        // A file that may not grow must be an error to the program and not its end, as on a full
        // disk; see `limit_files`.
        let ignoring = "trap '' XFSZ; exec \"$0\" \"$@\"";
        let mut command = Command::new("bash");
        command
            .args(["-c", ignoring, env!("CARGO_BIN_EXE_evenrow")])
            .args(["watch", "--config"])
            .arg(self.path("evenrow.toml"));
        command.env_remove("RUST_LOG");
        let mut daemon = Daemon {
            process: Running::start(&mut command),
            port: self.port,
        };
        wait_for(SOON, "the daemon to answer", || {
            assert!(daemon.process.ended().is_none(), "the daemon has ended");
            daemon.ask("/health/live").ok().filter(|a| a.status == 200)
        });
        daemon
    }

    /// Starts it and waits until it takes measurements in.
    pub fn start_ready(&self) -> Daemon {
        let daemon = self.start();
        daemon.wait_ready();
        daemon
    }
}

impl Daemon {
    /// The address of a path.
    pub fn address(&self, path: &str) -> String {
        format!("http://127.0.0.1:{}{path}", self.port)
    }

    /// Where it listens, for Prometheus.
    pub fn target(&self) -> String {
        format!("127.0.0.1:{}", self.port)
    }

    /// Asks for a path.
    ///
    /// # Errors
    /// When it does not answer.
    pub fn ask(&self, path: &str) -> Result<Answer, String> {
        http::get(&self.address(path))
    }

    /// The JSON at a path that must be there.
    #[track_caller]
    pub fn json(&self, path: &str) -> Value {
        let answer = self.ask(path).expect("the daemon answers");
        assert_eq!(answer.status, 200, "{path}: {}", answer.text);
        answer.json()
    }

    /// Waits until `/health/ready` agrees.
    #[track_caller]
    pub fn wait_ready(&self) {
        wait_for(SOON, "the daemon to be ready", || {
            self.ask("/health/ready").ok().filter(|a| a.status == 200)
        });
    }

    /// The value of a series in `/metrics`, by its name and labels as they are written there.
    pub fn metric(&self, series: &str) -> Option<f64> {
        let text = self.ask("/metrics").ok()?.text;
        let line = text.lines().find_map(|l| l.strip_prefix(series))?;
        line.trim().parse().ok()
    }

    /// Waits until a series has a value.
    #[track_caller]
    pub fn wait_metric(&self, series: &str, wanted: impl Fn(f64) -> bool) -> f64 {
        wait_for(SOON, series, || self.metric(series).filter(|v| wanted(*v)))
    }

    /// Its log so far.
    pub fn log(&self) -> Vec<String> {
        self.process.lines()
    }

    /// Waits for a line of the log that has all these words.
    #[track_caller]
    pub fn wait_log(&self, words: &[&str]) {
        wait_for(SOON, &format!("a line of the log with {words:?}"), || {
            let has = |line: &String| words.iter().all(|w| line.contains(w));
            self.log().into_iter().find(has)
        });
    }

    /// From here on no file of the daemon takes bytes beyond this place, as if the disk were full.
    #[track_caller]
    pub fn limit_files(&self, bytes: &str) {
        let done = Command::new("prlimit")
            .args(["--pid", &self.process.id().to_string()])
            .arg(format!("--fsize={bytes}:unlimited"))
            .status();
        assert!(done.is_ok_and(|s| s.success()), "prlimit sets the limit");
    }

    /// The cycles in each source's window, oldest first.
    fn cycles(&self) -> Vec<Vec<i64>> {
        let windows = self.json("/api/v1/banks/filler-2/windows");
        let items = windows["items"].as_array().expect("a list");
        let cycle = |v: &Value| v["cycle"].as_i64().expect("a cycle");
        let window = |w: &Value| {
            let values = w["values"].as_array().expect("values").iter();
            values.map(cycle).collect()
        };
        items.iter().map(window).collect()
    }

    /// Waits until every window ends with the newest cycle and holds every one before it once.
    #[track_caller]
    pub fn nothing_is_missing(&self, newest: i64) {
        let whole: Vec<i64> = (newest - 79..=newest).collect();
        let last = |window: &Vec<i64>| window.last() == Some(&newest);
        let windows = wait_for(SOON, "the newest cycle in every window", || {
            let windows = self.cycles();
            (windows.len() == HEADS && windows.iter().all(last)).then_some(windows)
        });
        for (head, window) in windows.iter().enumerate() {
            assert_eq!(*window, whole, "head {}", head + 1);
        }
    }

    /// A power cut.
    pub fn kill(mut self, announced: &[&str]) {
        self.process.kill();
        calm(&self.log(), announced);
    }

    /// A clean end: within five seconds, with 0, and without an unannounced complaint in the log.
    #[track_caller]
    pub fn end(mut self, announced: &[&str]) {
        let started = Instant::now();
        self.process.signal("TERM");
        // A little more, so that a late end is told as one.
        let status = self.process.wait(END * 2);
        let took = started.elapsed();
        assert!(took < END, "the end took {took:?}");
        assert_eq!(status.code(), Some(0), "the end was not clean");
        calm(&self.log(), announced);
    }
}

/// No line warns or complains but those that have one of the announced parts.
#[track_caller]
fn calm(log: &[String], announced: &[&str]) {
    let loud = |line: &&String| {
        let mut words = line.split(|c: char| !c.is_ascii_alphanumeric());
        words.any(|w| matches!(w, "WARN" | "ERROR" | "panicked"))
    };
    let surprising = |line: &&String| !announced.iter().any(|part| line.contains(part));
    let lines: Vec<&String> = log.iter().filter(loud).filter(surprising).collect();
    assert!(lines.is_empty(), "the log complains: {lines:#?}");
}

#[test]
fn a_complaint_in_the_log_is_noticed() {
    let log = [
        "2026-07-03T14:00:00Z  INFO evenrow: no ERRORS here, FORWARNED".to_owned(),
        "2026-07-03T14:00:00Z  WARN evenrow: the broker is away".to_owned(),
    ];
    calm(&log, &["the broker is away"]);
    calm(&log[..1], &[]);
    assert!(std::panic::catch_unwind(|| calm(&log, &["the store"])).is_err());
}
