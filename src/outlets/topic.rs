//! Topics and addresses of what leaves: the one place where names of the plant become part of one.

use crate::notice::Notice;

/// A name as one level of a topic: `/`, `+`, `#`, spaces and control characters are written as `-`.
pub fn level(name: &str) -> String {
    let reserved = |c: char| matches!(c, '/' | '+' | '#') || c.is_whitespace() || c.is_control();
    name.chars()
        .map(|c| if reserved(c) { '-' } else { c })
        .collect()
}

/// Where the state of the whole program stands, and its last will.
pub fn status(plant: &str) -> String {
    format!("evenrow/{}/status", level(plant))
}

/// Where a notice stands while it is open.
pub fn notice(notice: &Notice) -> String {
    format!(
        "evenrow/{}/notices/{}/{}/{}",
        level(&notice.plant),
        level(&notice.bank),
        notice.kind.word(),
        level(&notice.id)
    )
}

/// The `source` of events, which must be a URI reference (RFC 3986): other characters than the
/// unreserved ones are written as percent and two digits for each byte.
pub fn event_source(plant: &str) -> String {
    let mut path = String::from("/evenrow/");
    for byte in level(plant).bytes() {
        match byte {
            b'A'..=b'Z' | b'a'..=b'z' | b'0'..=b'9' | b'-' | b'.' | b'_' | b'~' => {
                path.push(char::from(byte));
            }
            other => path.push_str(&format!("%{other:02X}")),
        }
    }
    path
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_name_is_always_one_level_without_wildcards() {
        for (name, wanted) in [
            ("filler-2", "filler-2"),
            ("filler 2", "filler-2"),
            ("a/b+c#d", "a-b-c-d"),
            ("Abfüller\t3\n", "Abfüller-3-"),
        ] {
            assert_eq!(level(name), wanted, "{name:?}");
        }
        assert_eq!(status("North/South"), "evenrow/North-South/status");
    }

    #[test]
    fn the_event_source_is_plain_ascii() {
        assert_eq!(event_source("Quayside"), "/evenrow/Quayside");
        assert_eq!(event_source("Føyen 1"), "/evenrow/F%C3%B8yen-1");
    }
}
