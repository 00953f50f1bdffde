//! The start of a payload, made printable.
//!
//! What must hold: at most [`MOST_EXCERPT`] characters, none of which can break a line, move a
//! cursor or reverse the direction of the text around it. Only the start of the bytes is looked at.

/// Longest excerpt, in characters.
pub const MOST_EXCERPT: usize = 120;

/// The start of `bytes` as one printable line; ends with `…` when something was left out.
pub fn excerpt(bytes: &[u8]) -> String {
    // No character is longer than four bytes, so this holds more than the excerpt can show.
    let start = bytes.get(..4 * (MOST_EXCERPT + 1)).unwrap_or(bytes);
    let mut out = String::with_capacity(start.len().min(MOST_EXCERPT));
    let mut length = 0;
    let mut whole = start.len() == bytes.len();
    for c in String::from_utf8_lossy(start).chars() {
        let written = printable(c);
        let more = written.chars().count();
        if length + more > MOST_EXCERPT {
            whole = false;
            break;
        }
        out.push_str(&written);
        length += more;
    }
    if !whole {
        while length >= MOST_EXCERPT {
            out.pop();
            length -= 1;
        }
        out.push('…');
    }
    out
}

/// A character as it may be shown.
fn printable(c: char) -> String {
    let hidden = matches!(c,
        '\u{200b}'..='\u{200f}' | '\u{2028}'..='\u{202e}' | '\u{2060}'..='\u{206f}' | '\u{feff}');
    if c.is_control() || hidden {
        c.escape_default().to_string()
    } else {
        c.to_string()
    }
}
