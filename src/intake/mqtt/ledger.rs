//! What was delivered to us and not yet acknowledged, so that a redelivery is told from a fresh
//! message.
//!
//! MQTT redelivers a QoS 1 message with its packet id and the DUP flag (MQTT 5.0 §4.4, §3.3.1.1)
//! when a session is resumed. DUP alone proves nothing, because the first delivery may never have
//! reached us; its absence proves that the message is fresh. So a message is a redelivery when it
//! has the flag, and packet id and hash are those of one that was handed on before.
//!
//! What must hold: a message is handed on once; it is acknowledged only on the connection on which
//! the broker last delivered it, and only after its receipt came back. Memory is bounded by the
//! number of packet ids. Deliberately absent: sockets, time.

use std::collections::HashMap;

use crate::intake::arrival::Receipt;

/// What a delivery is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Delivery {
    /// Not seen before: hand it on.
    Fresh(Receipt),
    /// Handed on before and not yet durable; its own receipt will acknowledge this delivery too.
    UnderWay,
    /// Durable already: refuse it, and acknowledge it by this receipt.
    Durable(Receipt),
}

/// The messages in flight.
#[derive(Debug)]
pub(super) struct Ledger {
    /// The connection, counted from 1; 0 before the first.
    epoch: u64,
    messages: HashMap<u16, Entry>,
}

#[derive(Clone, Copy, Debug)]
struct Entry {
    hash: u64,
    /// The epoch of the receipt that was handed on.
    handed: u64,
    /// The connection on which the broker delivered it last.
    delivered: u64,
    durable: bool,
}

impl Ledger {
    /// Begins with what an earlier process had made durable and perhaps not acknowledged.
    pub(super) fn new(already: Vec<(u16, u64)>) -> Self {
        let entry = |(packet, hash)| {
            let entry = Entry {
                hash,
                handed: 0,
                delivered: 0,
                durable: true,
            };
            (packet, entry)
        };
        Self {
            epoch: 0,
            messages: already.into_iter().map(entry).collect(),
        }
    }

    /// Whether there was a connection before.
    pub(super) fn has_connected(&self) -> bool {
        self.epoch > 0
    }

    /// A connection begins; without a session nothing of the earlier ones will be redelivered.
    pub(super) fn connected(&mut self, session_present: bool) {
        self.epoch += 1;
        if !session_present {
            self.messages.clear();
        }
    }

    /// A message arrives; `packet` is `None` for QoS 0, and `dup` is the flag of that name.
    pub(super) fn delivered(&mut self, packet: Option<u16>, hash: u64, dup: bool) -> Delivery {
        let epoch = self.epoch;
        let receipt = Receipt {
            epoch,
            packet,
            hash,
        };
        let Some(packet) = packet else {
            return Delivery::Fresh(receipt);
        };
        let known = self.messages.get_mut(&packet);
        let again = known.filter(|entry| dup && entry.hash == hash);
        if let Some(entry) = again {
            entry.delivered = epoch;
            if !entry.durable {
                return Delivery::UnderWay;
            }
            entry.handed = epoch;
            return Delivery::Durable(receipt);
        }
        let entry = Entry {
            hash,
            handed: epoch,
            delivered: epoch,
            durable: false,
        };
        self.messages.insert(packet, entry);
        Delivery::Fresh(receipt)
    }

    /// A receipt comes back; the packet id to acknowledge on this connection, if any. The entry
    /// stays until its packet id is used again, because the acknowledgement may be lost.
    pub(super) fn durable(&mut self, receipt: Receipt) -> Option<u16> {
        let packet = receipt.packet?;
        let entry = self.messages.get_mut(&packet)?;
        if entry.hash != receipt.hash || entry.handed != receipt.epoch {
            return None;
        }
        entry.durable = true;
        (entry.delivered == self.epoch).then_some(packet)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn fresh(ledger: &mut Ledger, packet: u16, hash: u64) -> Receipt {
        match ledger.delivered(Some(packet), hash, false) {
            Delivery::Fresh(receipt) => receipt,
            other => panic!("{other:?}"),
        }
    }

    #[test]
    fn a_message_is_acknowledged_once_it_is_durable() {
        let mut ledger = Ledger::new(Vec::new());
        ledger.connected(false);
        let a = fresh(&mut ledger, 1, 11);
        let b = fresh(&mut ledger, 2, 11);
        assert_eq!(ledger.durable(b), Some(2));
        assert_eq!(ledger.durable(a), Some(1));
        // The broker uses the id again for an equal payload.
        let c = fresh(&mut ledger, 1, 11);
        assert_eq!(ledger.durable(c), Some(1));
    }

    #[test]
    fn a_redelivery_of_what_is_under_way_waits_for_its_receipt() {
        let mut ledger = Ledger::new(Vec::new());
        ledger.connected(false);
        let a = fresh(&mut ledger, 1, 11);
        ledger.connected(true);
        assert_eq!(ledger.delivered(Some(1), 11, true), Delivery::UnderWay);
        assert_eq!(ledger.durable(a), Some(1));
    }

    #[test]
    fn a_receipt_of_an_earlier_connection_is_no_acknowledgement() {
        let mut ledger = Ledger::new(Vec::new());
        ledger.connected(false);
        let a = fresh(&mut ledger, 1, 11);
        ledger.connected(true);
        assert_eq!(ledger.durable(a), None);
        let Delivery::Durable(again) = ledger.delivered(Some(1), 11, true) else {
            panic!("not known as durable")
        };
        assert_eq!(again.epoch, 2);
        assert_eq!(ledger.durable(again), Some(1));
        // A lost acknowledgement: delivered once more on the next connection.
        ledger.connected(true);
        assert!(matches!(
            ledger.delivered(Some(1), 11, true),
            Delivery::Durable(_)
        ));
    }

    #[test]
    fn what_an_earlier_process_kept_is_refused_in_a_resumed_session_only() {
        for (session_present, dup, hash, durable) in [
            (true, true, 11, true),
            (true, false, 11, false),
            (true, true, 12, false),
            (false, true, 11, false),
        ] {
            let mut ledger = Ledger::new(vec![(1, 11)]);
            ledger.connected(session_present);
            let got = ledger.delivered(Some(1), hash, dup);
            assert_eq!(matches!(got, Delivery::Durable(_)), durable, "{got:?}");
        }
    }

    #[test]
    fn a_lost_session_forgets_everything() {
        let mut ledger = Ledger::new(vec![(2, 22)]);
        ledger.connected(true);
        let a = fresh(&mut ledger, 1, 11);
        ledger.connected(false);
        let b = fresh(&mut ledger, 1, 11);
        assert_eq!(ledger.durable(a), None);
        assert_eq!(ledger.durable(b), Some(1));
        assert!(matches!(
            ledger.delivered(Some(2), 22, true),
            Delivery::Fresh(_)
        ));
    }

    #[test]
    fn a_message_without_packet_id_is_always_fresh() {
        let mut ledger = Ledger::new(Vec::new());
        ledger.connected(false);
        let got = ledger.delivered(None, 11, false);
        let Delivery::Fresh(receipt) = got else {
            panic!("{got:?}")
        };
        assert_eq!(ledger.durable(receipt), None);
        assert!(ledger.messages.is_empty());
    }

    /// A broker that keeps messages until they are acknowledged on its present connection, a
    /// pipeline that makes them durable in any order, and a connection that breaks at any time:
    /// every message is handed on exactly once and all are acknowledged in the end.
    #[test]
    fn nothing_is_lost_or_doubled_over_a_line_that_breaks() {
        for seed in 0..300 {
            let mut random = fastrand::Rng::with_seed(seed);
            let mut ledger = Ledger::new(Vec::new());
            ledger.connected(false);
            let mut unacknowledged: Vec<(u16, u64)> = Vec::new();
            let mut pipeline: Vec<Receipt> = Vec::new();
            let mut handed = 0;
            let mut published = 0_u64;
            while published < 200 || !unacknowledged.is_empty() {
                match random.u8(0..10) {
                    0..=3 if published < 200 && unacknowledged.len() < 8 => {
                        let busy = |id: &u16| unacknowledged.iter().any(|(used, _)| used == id);
                        let packet = (1..=9).find(|id| !busy(id)).unwrap();
                        // Few different payloads, so that equal ones meet on an id.
                        let hash = published % 3;
                        unacknowledged.push((packet, hash));
                        pipeline.push(fresh(&mut ledger, packet, hash));
                        handed += 1;
                        published += 1;
                    }
                    4..=8 if !pipeline.is_empty() => {
                        let receipt = pipeline.swap_remove(random.usize(0..pipeline.len()));
                        // One acknowledgement in four is lost with the line that carries it.
                        if let Some(packet) = ledger.durable(receipt) {
                            if random.u8(0..4) > 0 {
                                unacknowledged.retain(|(id, _)| *id != packet);
                            } else {
                                handed += redeliver(&mut ledger, &unacknowledged, &mut pipeline);
                            }
                        }
                    }
                    9 => handed += redeliver(&mut ledger, &unacknowledged, &mut pipeline),
                    _ => {}
                }
            }
            assert_eq!((published, handed), (200, 200), "seed {seed}");
        }
    }

    /// Reconnects to the session; counts what was wrongly taken as fresh.
    fn redeliver(ledger: &mut Ledger, waiting: &[(u16, u64)], pipeline: &mut Vec<Receipt>) -> u64 {
        ledger.connected(true);
        let mut wrong = 0;
        for &(packet, hash) in waiting {
            match ledger.delivered(Some(packet), hash, true) {
                Delivery::Fresh(_) => wrong += 1,
                Delivery::UnderWay => {}
                Delivery::Durable(receipt) => pipeline.push(receipt),
            }
        }
        wrong
    }
}
