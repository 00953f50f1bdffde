//! The words of the plant as types: names, times, exact values, measurements, banks.
//!
//! Owns nothing that changes. Constructors check, so a value of these types is a good one.
//! Deliberately absent: clocks, files, formats, statistics.

mod bank;
mod calendar;
mod figures;
mod line_event;
mod reason;
mod shift;
mod time;
mod value;

pub use bank::{
    Bank, BankIx, Budget, BudgetError, Characteristic, Group, Layout, Offsets, Pairing, SourceIx,
    Sources,
};
pub use calendar::{Calendar, Stretch};
pub use figures::{fixed, signed};
pub use line_event::{LineChange, LineEvent};
pub use reason::{Reason, Refusal};
pub use shift::Shift;
pub use time::{Time, US_PER_DAY, US_PER_S};
pub use value::{Value, ValueError};

use std::sync::Arc;

/// A name as the plant writes it (bank, source, unit, person); cheap to clone.
pub type Name = Arc<str>;

/// One value of one source, decoded and not yet judged by its window.
#[derive(Clone, Debug, PartialEq, serde::Serialize, serde::Deserialize)]
pub struct Measurement {
    /// The bank it belongs to, by its place in the configuration.
    pub bank: BankIx,
    /// The source as the topic or payload names it.
    pub source: Name,
    /// The value, exact where the payload was decimal text.
    pub value: Value,
    /// When it was taken, where the payload says so; otherwise the time received stands in.
    pub taken: Option<Time>,
    /// The cycle or sequence number, where the payload carries one.
    pub cycle: Option<i64>,
}

/// A name as one level of a topic: `/`, `+`, `#`, blanks and control characters become `-`. Settings
/// see to it that no two banks of a plant become the same.
pub fn topic_name(name: &str) -> String {
    let safe = |c: char| match c {
        '/' | '+' | '#' => '-',
        c if c.is_whitespace() || c.is_control() => '-',
        c => c,
    };
    name.chars().map(safe).collect()
}

/// A name as part of an address (RFC 3986): everything but the unreserved is written in percents.
pub fn address_name(name: &str) -> String {
    let mut text = String::with_capacity(name.len());
    for byte in name.bytes() {
        if byte.is_ascii_alphanumeric() || b"-._~".contains(&byte) {
            text.push(char::from(byte));
        } else {
            text.push_str(&format!("%{byte:02X}"));
        }
    }
    text
}

#[cfg(test)]
mod tests {
    use super::topic_name;

    #[test]
    fn names_in_topics_are_one_level_without_wildcards() {
        for (name, wanted) in [
            ("filler-2", "filler-2"),
            ("filler 2/net + tare #", "filler-2-net---tare--"),
            ("Fülldüse\t9\u{7}", "Fülldüse-9-"),
        ] {
            assert_eq!(topic_name(name), wanted);
        }
    }
}
