//! Addresses of our own: what is written into links, and which way back may be followed.
//!
//! What must hold: no link that came with a request leads to another host.

use axum::http::Uri;
use percent_encoding::{AsciiSet, NON_ALPHANUMERIC, utf8_percent_encode};

/// The sign-in address that leads back to this one.
pub fn sign_in_from(uri: &Uri) -> String {
    let back = uri.path_and_query().map_or("/", |p| p.as_str());
    format!("/sign-in?next={}", percent(back))
}

/// A bank's page.
pub fn bank(name: &str) -> String {
    format!("/banks/{}", percent(name))
}

/// A source's page.
pub fn source(bank_name: &str, name: &str) -> String {
    format!("/banks/{}/sources/{}", percent(bank_name), percent(name))
}

/// A notice's page.
pub fn notice(id: &str) -> String {
    format!("/notices/{}", percent(id))
}

/// Only an address of our own, else the plant's page: no sign-in link may lead to another host.
pub fn local(next: &str) -> String {
    let own = next.starts_with('/')
        && !next.starts_with("//")
        && !next.contains(['\\', '\r', '\n', '\t'])
        && next.is_ascii();
    if own { next } else { "/" }.to_owned()
}

/// Everything but RFC 3986's unreserved characters.
const RESERVED: &AsciiSet = &NON_ALPHANUMERIC
    .remove(b'-')
    .remove(b'_')
    .remove(b'.')
    .remove(b'~');

/// Percent-encodes a text for one part of a path or one value of a query.
pub fn percent(text: &str) -> String {
    utf8_percent_encode(text, RESERVED).to_string()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_way_back_stays_in_the_house() {
        for (next, to) in [
            ("/banks/filler-2?span=40", "/banks/filler-2?span=40"),
            ("//elsewhere", "/"),
            ("/\\elsewhere", "/"),
            ("http://elsewhere", "/"),
            ("", "/"),
            ("/a\r\nb", "/"),
        ] {
            assert_eq!(local(next), to, "{next:?}");
        }
        assert_eq!(percent("filler 2/ä"), "filler%202%2F%C3%A4");
    }
}
