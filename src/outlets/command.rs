//! Notices by a program of the plant: it is started for each notice and reads it as JSON.
//!
//! The arguments are fixed, so nothing that a notice says can become one. What must hold: a program
//! that takes too long is killed with everything it has started; exit code 0 is the confirmation.

use std::collections::VecDeque;
use std::process::{ExitStatus, Stdio};
use std::sync::{Mutex, PoisonError};
use std::time::Duration;

use rustix::process::{Pid, Signal, kill_process_group};
use tokio::io::{AsyncBufReadExt, AsyncRead, AsyncWriteExt, BufReader};
use tokio::process::{Child, ChildStdin, Command};
use tracing::info;

use crate::model::Name;
use crate::settings::{Outlet, Program};

use super::letter::Letter;
use super::postman::{Carrier, Failure};

/// Of each stream that a program writes, so many last lines are told.
const LINES_TOLD: usize = 5;
/// Of each line, so many bytes.
const BYTES_TOLD: usize = 200;

/// How long the output of a program that has ended is read: what it started may go on and hold it
/// open.
const OUTPUT_WITHIN: Duration = Duration::from_millis(200);

/// Hands letters to a program.
pub struct CommandCarrier {
    name: Name,
    program: Program,
    time_limit: Duration,
}

impl CommandCarrier {
    /// For this program.
    pub fn new(outlet: &Outlet, program: &Program) -> Self {
        Self {
            name: outlet.name.clone(),
            program: program.clone(),
            time_limit: outlet.time_limit,
        }
    }

    fn start(&self) -> Result<Running, Failure> {
        let mut command = Command::new(&self.program.path);
        command
            .args(&self.program.arguments)
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .process_group(0);
        let path = self.program.path.display();
        let child = command
            .spawn()
            .map_err(|e| Failure::new(format!("{path} cannot be started: {e}")))?;
        let id = child.id().and_then(|id| i32::try_from(id).ok());
        Ok(Running {
            group: id.and_then(Pid::from_raw),
            child,
        })
    }
}

impl Carrier for CommandCarrier {
    async fn carry(&self, letter: &Letter) -> Result<(), Failure> {
        let mut running = self.start()?;
        let said = Said::default();
        let worked = work(&mut running, letter.event(), &said);
        let ended = tokio::time::timeout(self.time_limit, worked).await;
        let said = said.told();
        let path = self.program.path.display();
        match ended {
            Ok(Ok(status)) if status.success() => {
                if !said.is_empty() {
                    info!("outlet \"{}\": {path} took the notice{said}", self.name);
                }
                Ok(())
            }
            Ok(Ok(status)) => Err(Failure::new(format!("{path} ended with {status}{said}"))),
            Ok(Err(e)) => Err(Failure::new(format!("{path} cannot be followed: {e}"))),
            Err(_) => Err(Failure::new(format!(
                "{path} was not done within {:?} and was killed{said}",
                self.time_limit
            ))),
        }
    }
}

/// A program and whatever it has started; killed together when dropped, unless it has ended.
struct Running {
    child: Child,
    group: Option<Pid>,
}

impl Drop for Running {
    fn drop(&mut self) {
        if let Some(group) = self.group {
            // A group that has ended by itself is as good as killed.
            let _ = kill_process_group(group, Signal::KILL);
        }
    }
}

/// Hands the event over and listens until the program has ended.
async fn work(running: &mut Running, event: Vec<u8>, said: &Said) -> std::io::Result<ExitStatus> {
    let child = &mut running.child;
    let (stdin, stdout, stderr) = (child.stdin.take(), child.stdout.take(), child.stderr.take());
    let output = async {
        tokio::join!(listen(stdout, &said.out), listen(stderr, &said.err));
    };
    let hand_over = hand_over(stdin, &event);
    tokio::pin!(output, hand_over);
    let (mut is_heard, mut is_handed_over) = (false, false);
    let status = loop {
        tokio::select! {
            status = child.wait() => break status?,
            () = &mut output, if !is_heard => is_heard = true,
            () = &mut hand_over, if !is_handed_over => is_handed_over = true,
        }
    };
    // From here on the number may be given to another group.
    running.group = None;
    if !is_heard {
        let _ = tokio::time::timeout(OUTPUT_WITHIN, output).await;
    }
    Ok(status)
}

/// A program may end, or close its input, without reading; its exit code tells what that means.
async fn hand_over(stdin: Option<ChildStdin>, event: &[u8]) {
    if let Some(mut stdin) = stdin {
        let _ = stdin.write_all(event).await;
        let _ = stdin.write_all(b"\n").await;
        let _ = stdin.shutdown().await;
    }
}

/// Keeps the last lines.
async fn listen(stream: Option<impl AsyncRead + Unpin>, said: &Tail) {
    let Some(stream) = stream else {
        return;
    };
    let mut reader = BufReader::new(stream);
    let mut line = Vec::new();
    loop {
        let chunk = match reader.fill_buf().await {
            Ok([]) | Err(_) => break,
            Ok(chunk) => chunk,
        };
        let length = chunk.len();
        for byte in chunk {
            match byte {
                b'\n' => said.keep(&mut line),
                _ if line.len() < BYTES_TOLD => line.push(*byte),
                _ => {}
            }
        }
        reader.consume(length);
    }
    said.keep(&mut line);
}

/// The last lines of what a program says on either stream.
#[derive(Default)]
struct Said {
    out: Tail,
    err: Tail,
}

/// The last lines of one stream.
#[derive(Default)]
struct Tail(Mutex<VecDeque<String>>);

impl Tail {
    fn keep(&self, line: &mut Vec<u8>) {
        let text = String::from_utf8_lossy(line).trim().to_owned();
        line.clear();
        if text.is_empty() {
            return;
        }
        let plain = |c: char| if c.is_control() { ' ' } else { c };
        let mut lines = self.0.lock().unwrap_or_else(PoisonError::into_inner);
        lines.push_back(text.chars().map(plain).collect());
        while lines.len() > LINES_TOLD {
            lines.pop_front();
        }
    }

    fn lines(&self) -> Vec<String> {
        let lines = self.0.lock().unwrap_or_else(PoisonError::into_inner);
        lines.iter().cloned().collect()
    }
}

impl Said {
    fn told(&self) -> String {
        let lines = [self.out.lines(), self.err.lines()].concat();
        if lines.is_empty() {
            return String::new();
        }
        format!(", saying \"{}\"", lines.join(" / "))
    }
}
