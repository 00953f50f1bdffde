//! A real Mosquitto on a free port, and its stock clients.

use std::fs;
use std::io::Write;
use std::net::TcpStream;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::time::Duration;

use tempfile::TempDir;

use super::running::{Running, free_port, wait_for};

/// How long the broker and its clients may take for anything.
const SOON: Duration = Duration::from_secs(20);

/// A broker whose folder and port outlive its process, so that it can go and come back.
pub struct Mosquitto {
    folder: TempDir,
    port: u16,
    process: Option<Running>,
    client: Vec<String>,
}

/// A message as a stock client saw it.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Seen {
    /// The topic.
    pub topic: String,
    /// Whether it was retained, seen from a client that came later.
    pub retained: bool,
    /// The payload; empty when what was retained was taken back.
    pub payload: String,
}

/// A stock client that listens.
pub struct Listener(Running);

impl Mosquitto {
    /// A broker that lets everybody in and keeps sessions over a restart.
    pub fn start() -> Self {
        Self::start_with("allow_anonymous true\n", |_| {})
    }

    /// A broker with these settings besides its listener on the loopback address. `{folder}` stands
    /// for its folder, which `prepare` may fill before the start.
    pub fn start_with(settings: &str, prepare: impl FnOnce(&Path)) -> Self {
        let folder = tempfile::tempdir().expect("a folder can be made");
        prepare(folder.path());
        let port = free_port();
        let at = folder.path().display().to_string();
        let config = format!(
            "per_listener_settings false\nuser root\nlog_dest stderr\npersistence true\n\
             persistence_location {at}/\nautosave_interval 1\nlog_type error\nlog_type warning\nlog_type notice\n\
             max_queued_messages 1000000\nlistener {port} 127.0.0.1\n{}\n",
            settings.replace("{folder}", &at)
        );
        fs::write(folder.path().join("broker.conf"), config).expect("the settings are written");
        let mut broker = Self {
            folder,
            port,
            process: None,
            client: Vec::new(),
        };
        broker.come_back();
        broker
    }

    /// A broker that is not there yet, for tests in which it comes late.
    pub fn absent() -> Self {
        let mut broker = Self::start();
        broker.go_away();
        broker
    }

    /// Options that every stock client of this broker gets (user, password, certificates).
    pub fn clients_say(&mut self, options: &[&str]) {
        self.client = options.iter().map(|o| (*o).to_owned()).collect();
    }

    /// Its port.
    pub fn port(&self) -> u16 {
        self.port
    }

    /// A path in its folder.
    pub fn path(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// Ends the broker as an operator would; sessions are saved.
    pub fn go_away(&mut self) {
        if let Some(mut process) = self.process.take() {
            process.signal("TERM");
            process.wait(SOON);
        }
    }

    /// Makes it stand still with its connections open: it takes bytes and answers nothing.
    pub fn freeze(&self) {
        if let Some(process) = &self.process {
            process.signal("STOP");
        }
    }

    /// Ends it at once, as a power cut would.
    pub fn crash(&mut self) {
        if let Some(mut process) = self.process.take() {
            process.kill();
        }
    }

    /// Starts it again on the same port.
    pub fn come_back(&mut self) {
        let mut command = Command::new(program("mosquitto"));
        command.arg("-c").arg(self.path("broker.conf"));
        let mut process = Running::start(&mut command);
        wait_for(SOON, "the broker to listen", || {
            assert!(
                process.ended().is_none(),
                "mosquitto ended: {:#?}",
                process.lines()
            );
            TcpStream::connect(("127.0.0.1", self.port)).ok()
        });
        self.process = Some(process);
    }

    fn client(&self, name: &str, topic: &str) -> Command {
        let mut command = Command::new(program(name));
        let port = self.port.to_string();
        command.args(["-h", "127.0.0.1", "-p", &port, "-q", "1", "-t", topic]);
        command.args(&self.client);
        command
    }

    /// Publishes one message with QoS 1 and the options given (`-r` for retained).
    pub fn publish(&self, topic: &str, payload: &[u8], options: &[&str]) {
        let mut command = self.client("mosquitto_pub", topic);
        // The client refuses to read nothing.
        let from = if payload.is_empty() { "-n" } else { "-s" };
        feed(command.arg(from).args(options), payload);
    }

    /// Publishes a message for each line, in order, with QoS 1.
    pub fn publish_lines(&self, topic: &str, lines: &[String]) {
        let mut command = self.client("mosquitto_pub", topic);
        feed(
            command.arg("-l"),
            format!("{}\n", lines.join("\n")).as_bytes(),
        );
    }

    /// A stock client that hears everything on `topic`, what is retained included.
    pub fn listen(&self, topic: &str) -> Listener {
        let mut command = self.client("mosquitto_sub", topic);
        command.args(["-F", "%t\t%r\t%p"]);
        Listener(Running::start(&mut command))
    }
}

impl Listener {
    /// Everything heard so far.
    pub fn seen(&self) -> Vec<Seen> {
        self.0
            .lines()
            .iter()
            .filter_map(|line| seen(line))
            .collect()
    }

    /// Waits for a message that is wanted.
    #[track_caller]
    pub fn wait(&self, what: &str, wanted: impl Fn(&Seen) -> bool) -> Seen {
        wait_for(SOON * 3, what, || self.seen().into_iter().find(&wanted))
    }
}

fn seen(line: &str) -> Option<Seen> {
    let mut parts = line.splitn(3, '\t');
    Some(Seen {
        topic: parts.next()?.to_owned(),
        retained: parts.next()? == "1",
        payload: parts.next()?.to_owned(),
    })
}

/// Runs a client to its end with this on its standard input.
#[track_caller]
fn feed(command: &mut Command, input: &[u8]) {
    let piped = command.stdin(Stdio::piped()).stderr(Stdio::piped());
    let mut child = piped
        .spawn()
        .expect("mosquitto-clients are missing; tests/all installs them");
    let mut stdin = child.stdin.take().expect("it was piped");
    // A client that ends early says why on its standard error.
    let _ = stdin.write_all(input);
    drop(stdin);
    let output = child.wait_with_output().expect("its end can be waited for");
    let said = String::from_utf8_lossy(&output.stderr);
    assert!(output.status.success(), "the client failed: {said}");
}

/// Debian puts servers where only root looks.
fn program(name: &str) -> PathBuf {
    let places = ["/usr/sbin", "/usr/local/sbin"];
    let mut found = places.iter().map(|p| Path::new(p).join(name));
    found.find(|p| p.exists()).unwrap_or_else(|| name.into())
}
