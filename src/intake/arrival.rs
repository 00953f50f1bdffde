//! One message as it arrived: its measurements and refusals for every bank it belongs to, and the
//! receipt with which it is acknowledged once all of them are durable or counted.
//!
//! Pure: bytes in, words out. What must hold: a message gives at least one measurement or refusal,
//! so nothing vanishes, unless its form says itself that it carries no values (a keep-alive); the receipt's hash stays the same from version to version, because it is
//! compared with what an earlier process kept.

use crate::model::{BankIx, Measurement, Reason, Refusal, Time};
use crate::settings::{Belief, Feed, PayloadForm};

use super::names::Names;
use super::payload::{self, Decodings, Fault, Message, Reader, excerpt};
use super::topics::Topics;

/// What one message became.
#[derive(Clone, Debug, PartialEq)]
pub struct Arrival {
    /// At least one per bank that took it.
    pub measurements: Vec<Measurement>,
    /// One for each item that a bank could not take, or one without a bank.
    pub refusals: Vec<Refusal>,
    /// Give it back when everything above is durable or counted.
    pub receipt: Receipt,
}

/// With this a message is acknowledged.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Receipt {
    /// The connection on which it came, counted from 1 in each process.
    pub epoch: u64,
    /// The packet id; `None` when the message needs no acknowledgement (QoS 0).
    pub packet: Option<u16>,
    /// [`hash`] of topic and payload.
    pub hash: u64,
}

impl Receipt {
    /// What to keep with the commit, so that a redelivery after a crash is recognised.
    pub fn pair(self) -> Option<(u16, u64)> {
        self.packet.map(|packet| (packet, self.hash))
    }
}

/// What identifies a message among those in flight: [`fnv1a`] over topic, a zero byte (which no topic
/// contains) and payload.
pub fn hash(topic: &str, payload: &[u8]) -> u64 {
    fnv1a(topic.as_bytes().iter().chain(&[0]).chain(payload))
}

/// FNV-1a in 64 bits, by G. Fowler, L. C. Noll and K.-P. Vo: offset basis and prime are theirs.
/// Written out, because the standard library's hashers may change from version to version.
fn fnv1a<'a>(bytes: impl Iterator<Item = &'a u8>) -> u64 {
    bytes.fold(0xcbf2_9ce4_8422_2325, |hash, &byte| {
        (hash ^ u64::from(byte)).wrapping_mul(0x0000_0100_0000_01b3)
    })
}

impl Arrival {
    /// Nothing yet.
    pub(super) fn empty(receipt: Receipt) -> Self {
        Self {
            measurements: Vec::new(),
            refusals: Vec::new(),
            receipt,
        }
    }
}

/// Turns messages into measurements and refusals.
#[derive(Debug)]
pub struct Decoder {
    /// By bank; `None` where a payload means nothing without those before it (Sparkplug).
    readers: Vec<Option<Reader>>,
    beliefs: Vec<Belief>,
    topics: Topics,
    names: Names,
}

impl Decoder {
    /// For these feeds, in the order of the banks; a payload larger than `most_bytes` is refused.
    pub fn new(feeds: Vec<Feed>, most_bytes: usize) -> Self {
        let reader = |feed: &Feed| match &feed.payload {
            PayloadForm::Sparkplug(_) => None,
            form => Some(Reader::new(form.clone(), most_bytes)),
        };
        Self {
            topics: Topics::new(feeds.iter().filter(|feed| reader(feed).is_some())),
            readers: feeds.iter().map(reader).collect(),
            beliefs: feeds.into_iter().map(|feed| feed.belief).collect(),
            names: Names::default(),
        }
    }

    /// The filters to subscribe.
    pub fn filters(&self) -> &[String] {
        self.topics.filters()
    }

    /// Decodes a message that arrives `now` for every bank it belongs to.
    pub fn decode(&mut self, topic: &str, payload: &[u8], receipt: Receipt, now: Time) -> Arrival {
        let mut arrival = Arrival::empty(receipt);
        let mut nobody = true;
        for (bank, topic_source) in self.topics.route(topic) {
            let reader = self.readers.get_mut(bank.index()).and_then(Option::as_mut);
            let belief = self.beliefs.get(bank.index());
            let (Some(reader), Some(belief)) = (reader, belief) else {
                continue;
            };
            nobody = false;
            let message = Message {
                payload,
                topic_source,
                now,
            };
            let decoded = reader.read(message);
            let from = From {
                bank,
                topic,
                payload,
            };
            enter(&mut arrival, from, belief, decoded, &mut self.names);
        }
        if nobody {
            let detail = "the topic belongs to no bank; if the configuration changed, the broker \
                          may still hold an earlier subscription of this client id";
            arrival.refusals = self.refusals(topic, payload, Reason::NoBank, detail);
        }
        arrival
    }

    /// The refusals of a message that is not even decoded, one for each bank it belongs to.
    pub fn refusals(
        &mut self,
        topic: &str,
        payload: &[u8],
        reason: Reason,
        detail: &str,
    ) -> Vec<Refusal> {
        let shown = self.names.shared(&excerpt(topic.as_bytes()));
        let refusal = |bank| Refusal {
            bank,
            reason,
            topic: shown.clone(),
            detail: detail.to_owned(),
            excerpt: excerpt(payload),
        };
        let banks = self.topics.route(topic).map(|(bank, _)| Some(bank));
        let mut refusals: Vec<_> = banks.map(refusal).collect();
        if refusals.is_empty() {
            refusals.push(refusal(None));
        }
        refusals
    }
}

/// Where decodings come from.
#[derive(Clone, Copy, Debug)]
pub(super) struct From<'m> {
    pub(super) bank: BankIx,
    pub(super) topic: &'m str,
    pub(super) payload: &'m [u8],
}

/// Adds what a message became for one bank, as far as it is believed.
pub(super) fn enter(
    arrival: &mut Arrival,
    from: From<'_>,
    belief: &Belief,
    decoded: Decodings<'_>,
    names: &mut Names,
) {
    for one in decoded {
        let one = one.and_then(|one| {
            let value = payload::believed(belief, one.value);
            let value = value.map_err(|fault| fault.of_source(&one.source))?;
            Ok(payload::Decoded { value, ..one })
        });
        match one {
            Ok(decoded) => arrival.measurements.push(Measurement {
                bank: from.bank,
                source: names.shared(&decoded.source),
                value: decoded.value,
                taken: decoded.taken,
                cycle: decoded.cycle,
            }),
            Err(Fault { reason, detail }) => arrival.refusals.push(Refusal {
                bank: Some(from.bank),
                reason,
                topic: names.shared(&excerpt(from.topic.as_bytes())),
                detail,
                excerpt: excerpt(from.payload),
            }),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::intake::fixture;
    use crate::model::{BankIx, Value};
    use crate::settings::PayloadForm;

    const RECEIPT: Receipt = Receipt {
        epoch: 1,
        packet: Some(7),
        hash: 0,
    };

    /// The first three are test vectors published with the algorithm; the last was computed by an
    /// independent implementation.
    #[test]
    fn the_hash_never_changes() {
        for (text, expected) in [
            ("", 0xcbf2_9ce4_8422_2325),
            ("a", 0xaf63_dc4c_8601_ec8c),
            ("foobar", 0x8594_4171_f739_67e8),
        ] {
            assert_eq!(fnv1a(text.as_bytes().iter()), expected, "{text}");
        }
        assert_eq!(hash("line/01/net", b"503.1"), 0xb015_64bc_a355_f40c);
        assert_ne!(hash("a/b", b"c"), hash("a", b"/bc"));
        assert_ne!(hash("a", b"1"), hash("a", b"2"));
    }

    #[test]
    fn one_message_serves_every_bank_it_belongs_to() {
        let feeds = [
            ("line/{source}/net", PayloadForm::Number),
            ("line/+/net", fixture::json(fixture::fields())),
            ("line/#", PayloadForm::Number),
        ];
        let mut decoder = Decoder::new(fixture::feeds(feeds), 4096);
        assert_eq!(decoder.filters(), ["line/#"]);
        let got = decoder.decode("line/07/net", b"503.1", RECEIPT, Time::from_us(0));
        let [measurement] = got.measurements.as_slice() else {
            panic!("{got:?}")
        };
        assert_eq!(measurement.source.as_ref(), "07");
        assert_eq!(measurement.value, Value::parse("503.1").unwrap());
        let refused: Vec<_> = got.refusals.iter().map(|r| (r.bank, r.reason)).collect();
        let expected = [
            (Some(BankIx(1)), Reason::FieldMissing),
            (Some(BankIx(2)), Reason::FieldMissing),
        ];
        assert_eq!(refused, expected);
        assert_eq!(got.receipt, RECEIPT);
    }

    #[test]
    fn a_topic_of_no_bank_is_refused_without_one() {
        let feeds = fixture::feeds([("line/{source}", PayloadForm::Number)]);
        let mut decoder = Decoder::new(feeds, 4096);
        let got = decoder.decode("other/\u{1b}7", b"503.1", RECEIPT, Time::from_us(0));
        let [refusal] = got.refusals.as_slice() else {
            panic!("{got:?}")
        };
        assert_eq!((refusal.bank, refusal.reason), (None, Reason::NoBank));
        assert_eq!(refusal.topic.as_ref(), "other/\\u{1b}7");
        assert_eq!(refusal.excerpt, "503.1");
    }
}
