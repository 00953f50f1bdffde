//! One HTTP request on a plain stream: as much of a web server as a test needs that wants to see how
//! its peer behaves when it is not answered.

use std::io::{self, Read};
use std::net::TcpListener;
use std::sync::{Arc, Mutex};
use std::thread;

/// A request as it came.
#[derive(Clone, Debug)]
pub struct Request {
    /// The first line and the headers, names in lower case.
    pub head: String,
    /// The body.
    pub body: String,
}

impl Request {
    /// Reads one whole; a stream that ends early gives what came.
    ///
    /// # Errors
    /// When the stream fails.
    pub fn read(stream: &mut impl Read) -> io::Result<Self> {
        let mut got = Vec::new();
        let mut chunk = [0; 4096];
        loop {
            let read = stream.read(&mut chunk)?;
            got.extend_from_slice(&chunk[..read]);
            let text = String::from_utf8_lossy(&got);
            let (head, body) = text.split_once("\r\n\r\n").unwrap_or((&*text, ""));
            let request = Self {
                head: head.to_lowercase(),
                body: body.to_owned(),
            };
            let length = request
                .header("content-length")
                .and_then(|l| l.parse().ok());
            if read == 0 || length.is_some_and(|l: usize| request.body.len() >= l) {
                return Ok(request);
            }
        }
    }

    /// The value of a header, in lower case.
    pub fn header(&self, name: &str) -> Option<&str> {
        let mut lines = self.head.lines();
        lines.find_map(|line| line.strip_prefix(name)?.strip_prefix(": "))
    }
}

/// What a desk does with a request that it has read.
#[derive(Clone, Copy, PartialEq, Eq)]
pub enum Desk {
    /// Confirms it.
    Answers,
    /// Keeps the connection open and says nothing.
    Stares,
}

impl Desk {
    /// Opens a desk on a port, for as long as the test's process lives; gives what it gets.
    pub fn open(self, port: u16) -> Arc<Mutex<Vec<Request>>> {
        let listener = TcpListener::bind(("127.0.0.1", port)).expect("the port is free");
        let seen = Arc::new(Mutex::new(Vec::new()));
        let kept = Arc::clone(&seen);
        thread::spawn(move || {
            let mut open = Vec::new();
            for mut stream in listener.incoming().flatten() {
                let Ok(request) = Request::read(&mut stream) else {
                    continue;
                };
                kept.lock().expect("whole").push(request);
                if self == Self::Stares {
                    open.push(stream);
                    continue;
                }
                let answer = b"HTTP/1.1 204 No Content\r\nconnection: close\r\n\r\n";
                // Whoever asked may be gone.
                let _ = io::Write::write_all(&mut stream, answer);
            }
        });
        seen
    }
}
