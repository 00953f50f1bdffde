//! What was heard, bank by bank: matches, values, clocks, refusals; and topics of no bank.
//!
//! Pure: messages and the time of their arrival in, counts and samples out. What must hold: memory is bounded,
//! whatever the broker carries. It judges as the daemon would, without keeping windows: doubles are
//! not seen.

use std::collections::{BTreeMap, HashSet};

use crate::engine::natural;
use crate::intake::arrival::{Arrival, Decoder, Receipt};
use crate::intake::mqtt::Overheard;
use crate::intake::nodes::Nodes;
use crate::model::{Bank, Measurement, Name, Pairing, Reason, Refusal, Sources, Time, Value};
use crate::settings::Settings;

/// Topics that are told apart; of further ones only the number of messages is known.
const MOST_TOPICS: usize = 10_000;
/// Values kept of a source, for mean, standard deviation and intervals.
const MOST_VALUES: usize = 5_000;
/// Sources told apart in a bank.
const MOST_SOURCES: usize = 2_000;
/// Messages of no bank that are kept for a proposal, and their bytes.
const MOST_KEPT: usize = 20_000;
const MOST_KEPT_BYTES: usize = 16 << 20;
/// As the engine does: a time further ahead than this is refused.
const AHEAD_US: i64 = 300 * crate::model::US_PER_S;

const RECEIPT: Receipt = Receipt {
    epoch: 0,
    packet: None,
    hash: 0,
};

/// A message of no bank.
#[derive(Clone, Debug)]
pub(super) struct Kept {
    pub(super) topic: String,
    pub(super) payload: Vec<u8>,
    pub(super) now: Time,
}

/// One value of a source.
#[derive(Clone, Copy, Debug)]
pub(super) struct Heard {
    pub(super) value: Value,
    pub(super) taken: Option<Time>,
    pub(super) now: Time,
    pub(super) cycle: Option<i64>,
}

/// What was heard for one bank.
#[derive(Debug, Default)]
pub(super) struct BankHeard {
    pub(super) topics: HashSet<String>,
    pub(super) values: u64,
    pub(super) sources: BTreeMap<Name, Vec<Heard>>,
    /// How many, and the newest.
    pub(super) refused: BTreeMap<Reason, (u64, Refusal)>,
    /// How far behind its arrival each value was taken, in microseconds.
    pub(super) behind_us: Vec<i64>,
}

/// Everything that was heard.
#[derive(Debug)]
pub(super) struct Survey<'s> {
    settings: &'s Settings,
    decoder: Decoder,
    nodes: Option<Nodes>,
    pub(super) messages: u64,
    pub(super) banks: Vec<BankHeard>,
    /// Topics of no bank: how many messages, and the start of the newest.
    pub(super) strangers: BTreeMap<String, (u64, String)>,
    /// Messages on further topics of no bank.
    pub(super) uncounted: u64,
    pub(super) kept: Vec<Kept>,
    kept_bytes: usize,
}

impl<'s> Survey<'s> {
    pub(super) fn new(settings: &'s Settings) -> Self {
        let most_bytes = settings.broker.most_bytes;
        Self {
            settings,
            decoder: Decoder::new(settings.feeds.clone(), most_bytes),
            nodes: Nodes::new(&settings.feeds, most_bytes),
            messages: 0,
            banks: settings
                .banks
                .iter()
                .map(|_| BankHeard::default())
                .collect(),
            strangers: BTreeMap::new(),
            uncounted: 0,
            kept: Vec::new(),
            kept_bytes: 0,
        }
    }

    pub(super) fn hear(&mut self, message: Overheard<'_>) {
        let Overheard {
            topic,
            payload,
            retained,
            now,
        } = message;
        self.messages += 1;
        let of_node = self
            .nodes
            .as_mut()
            .map(|nodes| nodes.take(topic, payload, now).arrival);
        let plain = self.decoder.decode(topic, payload, RECEIPT, now);
        let nobody = matches!(plain.refusals.as_slice(), [one] if one.reason == Reason::NoBank);
        if nobody && !self.node_is_meant(topic) {
            self.stranger(topic, payload, now);
            return;
        }
        let mut arrivals: Vec<Arrival> = of_node.into_iter().collect();
        if retained {
            let detail = "the message was retained by the broker";
            let mut refused = Arrival {
                measurements: Vec::new(),
                refusals: Vec::new(),
                ..plain
            };
            refused.refusals = self
                .decoder
                .refusals(topic, payload, Reason::Retained, detail);
            arrivals.push(refused);
        } else if !nobody {
            arrivals.push(plain);
        }
        for arrival in arrivals {
            self.enter(topic, arrival, now);
        }
    }

    fn node_is_meant(&self, topic: &str) -> bool {
        let filters = self.nodes.as_ref().map_or(&[][..], Nodes::filters);
        filters.iter().any(|filter| {
            let levels = filter.trim_end_matches("/#").split('/');
            levels
                .zip(topic.split('/'))
                .all(|(own, level)| own == "+" || own == level)
        })
    }

    fn stranger(&mut self, topic: &str, payload: &[u8], now: Time) {
        let full = self.strangers.len() >= MOST_TOPICS && !self.strangers.contains_key(topic);
        if full {
            self.uncounted += 1;
            return;
        }
        let start = crate::intake::payload::excerpt(payload);
        let known = self.strangers.entry(topic.to_owned()).or_default();
        *known = (known.0 + 1, start);
        self.kept_bytes += payload.len();
        if self.kept.len() < MOST_KEPT && self.kept_bytes < MOST_KEPT_BYTES {
            let (topic, payload) = (topic.to_owned(), payload.to_owned());
            self.kept.push(Kept {
                topic,
                payload,
                now,
            });
        }
    }

    fn enter(&mut self, topic: &str, arrival: Arrival, now: Time) {
        for refusal in arrival.refusals {
            if let Some(heard) = refusal
                .bank
                .and_then(|bank| self.banks.get_mut(bank.index()))
            {
                heard.topic(topic);
                heard.refuse(refusal);
            }
        }
        for m in arrival.measurements {
            let bank = self.settings.banks.get(m.bank.index());
            let heard = self.banks.get_mut(m.bank.index());
            let (Some(bank), Some(heard)) = (bank, heard) else {
                continue;
            };
            heard.topic(topic);
            match judged(bank, heard, &m, now) {
                Ok(()) => heard.accept(m, now),
                Err((reason, detail)) => heard.refuse(Refusal {
                    bank: Some(m.bank),
                    reason,
                    topic: topic.into(),
                    detail,
                    excerpt: m.value.to_string(),
                }),
            }
        }
    }
}

/// As the engine judges a measurement, doubles aside.
fn judged(
    bank: &Bank,
    heard: &BankHeard,
    m: &Measurement,
    now: Time,
) -> Result<(), (Reason, String)> {
    let taken = m.taken.unwrap_or(now);
    let refuse = |reason, detail: String| Err((reason, detail));
    if taken.us_since(now) > AHEAD_US {
        return refuse(
            Reason::TooFarAhead,
            format!("taken at {taken}, ahead of now, {now}"),
        );
    }
    if now.us_since(taken) > bank.oldest_us {
        return refuse(
            Reason::TooOld,
            format!("taken at {taken}, older than `oldest_days` allows"),
        );
    }
    if bank.pairing == Pairing::Cycle && m.cycle.is_none() {
        let detail = "the bank pairs by cycle and the payload carries none";
        return refuse(Reason::NoCycle, detail.to_owned());
    }
    match &bank.sources {
        Sources::Listed(names) if !names.contains(&m.source) => {
            let detail = format!("source \"{}\" is not one of those listed", m.source);
            refuse(Reason::UnknownSource, detail)
        }
        Sources::Shifts(calendar) if calendar.at(taken).is_none() => {
            let detail = format!("taken at {taken}, outside all shifts");
            refuse(Reason::OutsideShifts, detail)
        }
        Sources::Discover { most }
            if heard.sources.len() >= usize::from(*most)
                && !heard.sources.contains_key(&m.source) =>
        {
            refuse(
                Reason::TooManySources,
                format!("more than {most} sources, as `most_sources` says"),
            )
        }
        _ => Ok(()),
    }
}

impl BankHeard {
    fn topic(&mut self, topic: &str) {
        if self.topics.len() < MOST_TOPICS {
            self.topics.insert(topic.to_owned());
        }
    }

    fn refuse(&mut self, refusal: Refusal) {
        let known = self
            .refused
            .remove(&refusal.reason)
            .map_or(0, |(count, _)| count);
        self.refused.insert(refusal.reason, (known + 1, refusal));
    }

    fn accept(&mut self, m: Measurement, now: Time) {
        self.values += 1;
        if let Some(taken) = m.taken
            && self.behind_us.len() < MOST_VALUES
        {
            self.behind_us.push(now.us_since(taken));
        }
        if self.sources.len() < MOST_SOURCES || self.sources.contains_key(&m.source) {
            let values = self.sources.entry(m.source).or_default();
            if values.len() < MOST_VALUES {
                values.push(Heard {
                    value: m.value,
                    taken: m.taken,
                    now,
                    cycle: m.cycle,
                });
            }
        }
    }

    /// The sources in natural order.
    pub(super) fn in_order(&self) -> Vec<&Name> {
        let mut names: Vec<&Name> = self.sources.keys().collect();
        names.sort_by(|a, b| natural(a, b));
        names
    }
}
