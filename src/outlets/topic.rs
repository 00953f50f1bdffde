//! Topics and addresses of what leaves: the one place where names of the plant become part of one.

use crate::model::topic_name;
use crate::notice::Notice;

/// Where the state of the whole program stands, and its last will.
pub fn status(plant: &str) -> String {
    format!("evenrow/{}/status", topic_name(plant))
}

/// Where a test notice is published and taken back.
pub fn test(plant: &str) -> String {
    format!("evenrow/{}/test", topic_name(plant))
}

/// Where a notice stands while it is open.
pub fn notice(notice: &Notice) -> String {
    format!(
        "evenrow/{}/notices/{}/{}/{}",
        topic_name(&notice.plant),
        topic_name(&notice.bank),
        notice.kind.word(),
        topic_name(&notice.id)
    )
}

/// The `source` of events, which must be a URI reference (RFC 3986): other characters than the
/// unreserved ones are written as percent and two digits for each byte.
pub fn event_source(plant: &str) -> String {
    let mut path = String::from("/evenrow/");
    for byte in topic_name(plant).bytes() {
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
    fn names_are_single_levels() {
        assert_eq!(status("North/South"), "evenrow/North-South/status");
    }

    #[test]
    fn the_event_source_is_plain_ascii() {
        assert_eq!(event_source("Quayside"), "/evenrow/Quayside");
        assert_eq!(event_source("Føyen 1"), "/evenrow/F%C3%B8yen-1");
    }
}
