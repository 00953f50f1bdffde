//! Messages that are durable and perhaps not acknowledged: kept with every commit, so that after a
//! crash their redelivery is recognised.
//!
//! An acknowledgement can be lost on its way, so a message stays until its packet id is used again or
//! more messages have followed than the broker may have in flight.

use std::collections::VecDeque;

use crate::intake::mqtt::Receipt;

/// The list, oldest first.
#[derive(Debug)]
pub(super) struct Unsettled {
    pairs: VecDeque<(u16, u64)>,
    most: usize,
}

impl Unsettled {
    /// Goes on from what an earlier process left; `most` messages may be in flight.
    pub(super) fn new(already: Vec<(u16, u64)>, most: usize) -> Self {
        let mut list = Self {
            pairs: already.into(),
            most,
        };
        list.shorten();
        list
    }

    /// Adds the messages of a turn.
    pub(super) fn add(&mut self, receipts: &[Receipt]) {
        let new: Vec<(u16, u64)> = receipts.iter().filter_map(|r| r.pair()).collect();
        if new.is_empty() {
            return;
        }
        let mut ids: Vec<u16> = new.iter().map(|(packet, _)| *packet).collect();
        ids.sort_unstable();
        self.pairs
            .retain(|(packet, _)| ids.binary_search(packet).is_err());
        self.pairs.extend(new);
        self.shorten();
    }

    fn shorten(&mut self) {
        let surplus = self.pairs.len().saturating_sub(self.most);
        self.pairs.drain(..surplus);
    }

    /// As it is kept.
    pub(super) fn pairs(&self) -> Vec<(u16, u64)> {
        self.pairs.iter().copied().collect()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn receipts(of: &[(u16, u64)]) -> Vec<Receipt> {
        let receipt = |&(packet, hash): &(u16, u64)| Receipt {
            epoch: 1,
            packet: (packet > 0).then_some(packet),
            hash,
        };
        of.iter().map(receipt).collect()
    }

    #[test]
    fn a_message_stays_until_its_packet_id_is_used_again_or_the_list_is_full() {
        let mut list = Unsettled::new(vec![(9, 90), (1, 10)], 3);
        list.add(&receipts(&[(2, 20), (0, 5)]));
        assert_eq!(list.pairs(), [(9, 90), (1, 10), (2, 20)]);
        list.add(&receipts(&[(1, 11)]));
        assert_eq!(list.pairs(), [(9, 90), (2, 20), (1, 11)]);
        list.add(&receipts(&[(3, 30)]));
        assert_eq!(list.pairs(), [(2, 20), (1, 11), (3, 30)]);
        list.add(&[]);
        assert_eq!(list.pairs().len(), 3);
    }
}
