//! A real Mosquitto for process tests: started on a free loopback port with its own configuration in
//! its own folder, ended by its process id when dropped.
//!
//! ```text
//! let broker = Mosquitto::start();
//! broker.publish(&["-t", "line/01", "-m", "503.1", "-q", "1"]);
//! ```

#![allow(
    dead_code,
    reason = "every test file takes what it needs from this one"
)]

use std::io::ErrorKind;
use std::net::{TcpListener, TcpStream};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};

/// How long a broker may take to listen, on a machine that is busy compiling.
const PATIENCE: Duration = Duration::from_secs(20);

/// A running broker.
pub struct Mosquitto {
    child: Option<Child>,
    port: u16,
    folder: tempfile::TempDir,
}

impl Mosquitto {
    /// Lets everybody in and keeps sessions over restarts.
    pub fn start() -> Self {
        Self::with(|_| "allow_anonymous true\n".to_owned())
    }

    /// With further lines of configuration; they may name files that the closure writes into the
    /// broker's folder.
    pub fn with(lines: impl FnOnce(&Path) -> String) -> Self {
        let folder = tempfile::tempdir().expect("a temporary folder");
        let port = free_port();
        let lines = lines(folder.path());
        let at = folder.path().display();
        let config = format!(
            "listener {port} 127.0.0.1\nuser root\npersistence true\npersistence_location {at}/\n\
             autosave_interval 1\nlog_dest file {at}/log\nlog_type all\n{lines}"
        );
        std::fs::write(folder.path().join("mosquitto.conf"), config).expect("the configuration");
        let mut broker = Self {
            child: None,
            port,
            folder,
        };
        broker.run();
        broker
    }

    /// Its port on 127.0.0.1.
    pub fn port(&self) -> u16 {
        self.port
    }

    /// A file in its folder.
    pub fn file(&self, name: &str) -> PathBuf {
        self.folder.path().join(name)
    }

    /// What it logged so far.
    pub fn log(&self) -> String {
        std::fs::read_to_string(self.file("log")).unwrap_or_default()
    }

    /// Starts it (again, on the same port).
    pub fn run(&mut self) {
        let program = ["/usr/sbin/mosquitto", "/usr/local/sbin/mosquitto"]
            .into_iter()
            .find(|path| Path::new(path).exists())
            .unwrap_or("mosquitto");
        let child = Command::new(program)
            .arg("-c")
            .arg(self.file("mosquitto.conf"))
            .stdout(Stdio::null())
            .stderr(Stdio::null())
            .spawn()
            .expect("mosquitto should be installed");
        self.child = Some(child);
        let start = Instant::now();
        while TcpStream::connect(("127.0.0.1", self.port)).is_err() {
            assert!(start.elapsed() < PATIENCE, "mosquitto: {}", self.log());
            std::thread::sleep(Duration::from_millis(20));
        }
    }

    /// Ends it as an administrator would; it saves its sessions.
    pub fn stop(&mut self) {
        let Some(mut child) = self.child.take() else {
            return;
        };
        let asked = Command::new("kill").arg(child.id().to_string()).status();
        assert!(asked.is_ok_and(|status| status.success()), "kill");
        child.wait().expect("mosquitto ends");
    }

    /// Publishes with the stock client; `arguments` are those of `mosquitto_pub`.
    pub fn publish(&self, arguments: &[&str]) {
        let output = Command::new("mosquitto_pub")
            .args(["-h", "127.0.0.1", "-p", &self.port.to_string()])
            .args(arguments)
            .output()
            .expect("mosquitto_pub should be installed");
        let error = String::from_utf8_lossy(&output.stderr);
        assert!(output.status.success(), "mosquitto_pub: {error}");
    }
}

impl Drop for Mosquitto {
    fn drop(&mut self) {
        if let Some(mut child) = self.child.take() {
            let killed = child.kill();
            assert!(
                killed.is_ok() || killed.is_err_and(|e| e.kind() == ErrorKind::InvalidInput),
                "mosquitto is ended"
            );
            child.wait().ok();
        }
    }
}

/// A port on which nobody listens at this moment.
pub fn free_port() -> u16 {
    let listener = TcpListener::bind(("127.0.0.1", 0)).expect("a free port");
    listener.local_addr().expect("its address").port()
}
