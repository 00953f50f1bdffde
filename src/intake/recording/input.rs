//! The bytes of a recording: from a file or standard input, unpacked when they are gzip, guarded
//! against a line without end.

use std::fs::File;
use std::io::{self, BufRead, BufReader, Cursor, Read};

use flate2::read::MultiGzDecoder;

use super::Source;

/// Longest line that is read. A wide table of 1 000 sources has lines of about 10 KiB.
pub const MOST_LINE_BYTES: u64 = 1 << 20;

/// What a recording is read from.
pub(super) type Input = Box<dyn BufRead + Send>;

/// Opens the source and unpacks it when its first two bytes are gzip's (RFC 1952 §2.3.1).
pub(super) fn open(source: &Source) -> io::Result<Input> {
    let raw: Box<dyn Read + Send> = match source {
        Source::Stdin => Box::new(io::stdin()),
        Source::File(path) => Box::new(File::open(path)?),
    };
    unpacked(raw)
}

fn unpacked(mut raw: Box<dyn Read + Send>) -> io::Result<Input> {
    let mut magic = Vec::with_capacity(2);
    raw.by_ref().take(2).read_to_end(&mut magic)?;
    let is_gzip = magic == [0x1f, 0x8b];
    let whole = Cursor::new(magic).chain(raw);
    Ok(if is_gzip {
        Box::new(BufReader::new(Guard::new(MultiGzDecoder::new(whole))))
    } else {
        Box::new(BufReader::new(Guard::new(whole)))
    })
}

/// The start of what is read: its first byte that is neither blank nor part of a byte order mark,
/// not consumed, and how many lines were skipped before it.
pub(super) fn start(input: &mut Input) -> io::Result<Option<(u8, u64)>> {
    let mut skipped = 0;
    loop {
        let Some(&byte) = input.fill_buf()?.first() else {
            return Ok(None);
        };
        match byte {
            b' ' | b'\t' | b'\r' | b'\n' | 0xef | 0xbb | 0xbf => input.consume(1),
            byte => return Ok(Some((byte, skipped))),
        }
        skipped += u64::from(byte == b'\n');
    }
}

/// Fails on a line longer than [`MOST_LINE_BYTES`], before anybody collects it, and ends a last line
/// that has no end.
struct Guard<R> {
    inner: R,
    /// Bytes since the last end of a line.
    line: u64,
}

impl<R> Guard<R> {
    fn new(inner: R) -> Self {
        Self { inner, line: 0 }
    }
}

impl<R: Read> Read for Guard<R> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let read = self.inner.read(buffer)?;
        if let (0, 1.., Some(first)) = (read, self.line, buffer.first_mut()) {
            *first = b'\n';
            self.line = 0;
            return Ok(1);
        }
        let bytes = buffer.get(..read).unwrap_or_default();
        self.line = match bytes.iter().rposition(|&byte| byte == b'\n') {
            Some(at) => (bytes.len() - at - 1) as u64,
            None => self.line + bytes.len() as u64,
        };
        if self.line > MOST_LINE_BYTES {
            let words = format!("a line is longer than {MOST_LINE_BYTES} bytes");
            return Err(io::Error::new(io::ErrorKind::InvalidData, words));
        }
        Ok(read)
    }
}
