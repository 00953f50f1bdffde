//! Watches the broker's own count of messages that it dropped.
//!
//! A broker that has queued as much as it may for a slow or absent client drops what comes next,
//! and tells nobody; Mosquitto at least counts (`max_queued_messages` in its manual). So the count is
//! subscribed beside the measurements, and a rise is said in the log. It is the count for all of
//! the broker's clients, hence no trouble of ours by itself.
//!
//! What must hold: a broker that knows no such topic, or forbids it, does not matter; one that even
//! ends the connection when asked is not asked again.

/// Where Mosquitto publishes the count.
pub(super) const TOPIC: &str = "$SYS/broker/publish/messages/dropped";

/// What is known.
#[derive(Debug, Default)]
pub(super) struct Drops {
    asking: Asking,
    /// The last count heard, kept over a lost connection: that is when most is dropped.
    last: Option<u64>,
}

#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
enum Asking {
    #[default]
    NotYet,
    /// Asked on this connection, and not answered yet.
    Open,
    /// Answered on this connection.
    Answered,
    /// The broker ended the connection instead of answering.
    Never,
}

impl Drops {
    /// Whether to subscribe the count now.
    pub(super) fn wants(&mut self) -> bool {
        if self.asking == Asking::NotYet {
            self.asking = Asking::Open;
            return true;
        }
        false
    }

    /// The broker has answered, whatever it said.
    pub(super) fn answered(&mut self) {
        if self.asking == Asking::Open {
            self.asking = Asking::Answered;
        }
    }

    /// The connection is gone.
    pub(super) fn disconnected(&mut self) {
        self.asking = match self.asking {
            Asking::NotYet | Asking::Answered => Asking::NotYet,
            Asking::Open | Asking::Never => Asking::Never,
        };
    }

    /// A count came; how many messages were dropped since the last one. A lower count is that of a
    /// broker that started anew.
    pub(super) fn heard(&mut self, payload: &[u8]) -> Option<u64> {
        let count: u64 = std::str::from_utf8(payload).ok()?.trim().parse().ok()?;
        let last = self.last.replace(count)?;
        count.checked_sub(last).filter(|&rise| rise > 0)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_a_rise_is_told() {
        let mut drops = Drops::default();
        for (payload, rise) in [
            (&b"5"[..], None),
            (b"5", None),
            (b"12\n", Some(7)),
            (b"rubbish", None),
            (b"\xff", None),
            (b"13", Some(1)),
            (b"0", None),
            (b"2", Some(2)),
            (b"99999999999999999999999", None),
        ] {
            assert_eq!(drops.heard(payload), rise, "{payload:?}");
        }
    }

    #[test]
    fn a_broker_that_ends_the_connection_is_not_asked_again() {
        let mut drops = Drops::default();
        assert!(drops.wants());
        assert!(!drops.wants());
        drops.answered();
        drops.disconnected();
        assert!(drops.wants());
        drops.disconnected();
        assert!(!drops.wants());
        drops.disconnected();
        assert!(!drops.wants());
    }
}
