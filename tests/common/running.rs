//! Processes that a test starts and must not leave behind, and waiting with an end.

use std::io::{BufRead, BufReader, Read};
use std::net::TcpListener;
use std::process::{Child, Command, ExitStatus, Stdio};
use std::sync::{Arc, Mutex};
use std::thread;
use std::time::{Duration, Instant};

/// A process that is killed when the test is over, however it ends. Its output is kept.
pub struct Running {
    name: String,
    child: Child,
    lines: Arc<Mutex<Vec<String>>>,
}

impl Running {
    /// Starts a command.
    pub fn start(command: &mut Command) -> Self {
        let name = command.get_program().to_string_lossy().into_owned();
        let started = command
            .stdin(Stdio::null())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped());
        let mut child = started
            .spawn()
            .unwrap_or_else(|e| panic!("{name} cannot be started ({e}); tests/all installs it"));
        let lines = Arc::new(Mutex::new(Vec::new()));
        collect(child.stdout.take(), &lines);
        collect(child.stderr.take(), &lines);
        Self { name, child, lines }
    }

    /// What it has written so far, both streams, line by line.
    pub fn lines(&self) -> Vec<String> {
        self.lines.lock().expect("no reader has failed").clone()
    }

    /// Its process id.
    pub fn id(&self) -> u32 {
        self.child.id()
    }

    /// Whether it has ended.
    pub fn ended(&mut self) -> Option<ExitStatus> {
        self.child.try_wait().expect("its state can be asked for")
    }

    /// Sends it a signal by name.
    pub fn signal(&self, name: &str) {
        let sent = Command::new("kill")
            .args(["-s", name, &self.id().to_string()])
            .status();
        assert!(sent.is_ok_and(|s| s.success()), "kill -s {name} failed");
    }

    /// Waits for its end.
    pub fn wait(&mut self, most: Duration) -> ExitStatus {
        let name = self.name.clone();
        wait_for(most, &format!("the end of {name}"), || self.ended())
    }

    /// Ends it at once, as a power cut would.
    pub fn kill(&mut self) {
        // It may have ended by itself, which is what is wanted.
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

impl Drop for Running {
    fn drop(&mut self) {
        self.kill();
        if thread::panicking() {
            let lines = self.lines();
            let last = lines.len().saturating_sub(60);
            eprintln!("--- {} said last:\n{}", self.name, lines[last..].join("\n"));
        }
    }
}

fn collect(stream: Option<impl Read + Send + 'static>, into: &Arc<Mutex<Vec<String>>>) {
    let Some(stream) = stream else { return };
    let into = Arc::clone(into);
    thread::spawn(move || {
        for line in BufReader::new(stream).lines().map_while(Result::ok) {
            into.lock().expect("no reader has failed").push(line);
        }
    });
}

/// Asks again and again until there is an answer; the test fails when there is none in time.
#[track_caller]
pub fn wait_for<T>(most: Duration, what: &str, mut ask: impl FnMut() -> Option<T>) -> T {
    let started = Instant::now();
    loop {
        if let Some(answer) = ask() {
            return answer;
        }
        assert!(started.elapsed() < most, "waited {most:?} for {what}");
        thread::sleep(Duration::from_millis(50));
    }
}

/// A port that nothing listens on now.
pub fn free_port() -> u16 {
    let listener = TcpListener::bind("127.0.0.1:0").expect("the loopback address has free ports");
    listener.local_addr().expect("it is bound").port()
}
