//! The state of the edge nodes: who is born, what the aliases mean, which message comes next.
//!
//! A small state machine with `now` as an argument. Each message of a node but its death has the next
//! place in a sequence of 0 to 255 that its birth begins (§6.4.4). One that comes too early waits for those before
//! it, at most the reorder timeout (§5.4, host applications); then the missing ones are given up and
//! the node is asked for its birth. What must hold: memory is bounded by nodes, metrics and the 127 places a
//! message can be ahead; a death of an earlier session (another `bdSeq`, §6.4.9) ends nothing.

use std::collections::{BTreeMap, HashMap};
use std::sync::Arc;

use prost::Message as _;

use crate::model::{Reason, Time};
use crate::settings::Rebirth;

use super::super::Fault;
use super::wire::{Given, Metric, Payload};
use super::{Address, Kind, NAMESPACE, time, whole};

/// Edge nodes that are followed; a plant has some dozens.
const MOST_NODES: usize = 1000;
/// Metrics of one node, its devices' included.
const MOST_METRICS: usize = 100_000;
/// Messages further ahead of the sequence than half its range are behind it.
const HALF: u8 = 128;
/// A node is asked for its birth at most this often.
const ASK_EVERY_US: i64 = 10 * crate::model::US_PER_S;

/// A metric with its name and type found.
#[derive(Clone, Debug, PartialEq)]
pub struct Named {
    /// Its name.
    pub name: Arc<str>,
    /// Its type, from the message or the birth.
    pub datatype: Option<u32>,
    /// What was sent.
    pub metric: Metric,
}

/// A data message that can be believed.
#[derive(Clone, Debug, PartialEq)]
pub struct Heard {
    /// Its topic.
    pub topic: String,
    /// When it was sent.
    pub sent: Option<Time>,
    /// Its metrics.
    pub metrics: Vec<Named>,
    /// The last whole numbers of this device, by name: what a cycle may be among.
    pub known: Arc<HashMap<Arc<str>, i64>>,
}

/// What comes of messages and of time.
#[derive(Clone, Debug, PartialEq)]
pub enum Told {
    /// Fresh values.
    Data(Heard),
    /// A message, or a metric of one, that is not believed.
    Refused {
        /// Its topic.
        topic: String,
        /// Why.
        fault: Fault,
    },
    /// A node, or one device of it, is gone: what it measures is not known any more.
    Gone {
        /// The group.
        group: String,
        /// The edge node.
        node: String,
        /// The device; `None` for the node with all its devices.
        device: Option<String>,
    },
    /// Ask a node for its birth: publish this.
    Ask {
        /// The topic.
        topic: String,
        /// The payload.
        payload: Vec<u8>,
    },
}

/// The edge nodes of a plant.
#[derive(Debug)]
pub struct Session {
    reorder_us: i64,
    rebirth: Rebirth,
    nodes: BTreeMap<(String, String), Node>,
}

#[derive(Debug, Default)]
struct Node {
    /// The place of the next message; `None` before a birth.
    next: Option<u8>,
    /// The number of the session that death will name.
    session: Option<i64>,
    aliases: HashMap<u64, (Arc<str>, Option<u32>)>,
    /// The types by device and name; the node's own under no device.
    born: HashMap<Option<String>, Device>,
    metrics: usize,
    /// By their distance from the next place at the time, that is by place.
    waiting: BTreeMap<u8, Waiting>,
    asked: Option<Time>,
}

#[derive(Debug, Default)]
struct Device {
    types: HashMap<Arc<str>, Option<u32>>,
    known: Arc<HashMap<Arc<str>, i64>>,
}

#[derive(Debug)]
struct Waiting {
    since: Time,
    topic: String,
    payload: Payload,
}

impl Session {
    /// Nobody is born yet.
    pub fn new(reorder_us: i64, rebirth: Rebirth) -> Self {
        Self {
            reorder_us,
            rebirth,
            nodes: BTreeMap::new(),
        }
    }

    /// A connection begins: whatever was known may have changed unseen.
    pub fn connected(&mut self) {
        self.nodes.clear();
    }

    /// A message arrives. Topics that are not of an edge node's messages give nothing.
    pub fn take(&mut self, topic: &str, payload: &[u8], now: Time) -> Vec<Told> {
        let Some(address) = Address::of(topic) else {
            return Vec::new();
        };
        let mut told = Vec::new();
        let payload = match Payload::decode(payload) {
            Ok(payload) => payload,
            Err(error) => {
                let detail = format!("the payload is no Sparkplug B message: {error}");
                told.push(refused(topic, Reason::Malformed, detail));
                return told;
            }
        };
        let key = (address.group.to_owned(), address.node.to_owned());
        if !self.nodes.contains_key(&key) && self.nodes.len() >= MOST_NODES {
            let detail = format!("more than {MOST_NODES} edge nodes are not followed");
            told.push(refused(topic, Reason::TooManySources, detail));
            return told;
        }
        let rebirth = self.rebirth;
        let node = self.nodes.entry(key).or_default();
        match address.kind {
            Kind::NodeBirth => node.birth(&address, topic, payload, &mut told),
            Kind::NodeDeath => node.death(&address, &payload, &mut told),
            _ => node.in_sequence(&address, topic, payload, now, rebirth, &mut told),
        }
        told
    }

    /// Time has come: gives up what has been waited for too long.
    pub fn tick(&mut self, now: Time) -> Vec<Told> {
        let mut told = Vec::new();
        for ((group, name), node) in &mut self.nodes {
            let overdue = node
                .oldest()
                .is_some_and(|since| now.us_since(since) >= self.reorder_us);
            if overdue {
                node.give_up(&mut told);
                node.ask(group, name, now, self.rebirth, &mut told);
            }
        }
        told
    }

    /// When [`Session::tick`] has something to do; `None` while nothing waits.
    pub fn deadline(&self) -> Option<Time> {
        let oldest = self.nodes.values().filter_map(Node::oldest).min()?;
        Some(oldest.plus_us(self.reorder_us))
    }
}

impl Node {
    fn oldest(&self) -> Option<Time> {
        self.waiting.values().map(|waiting| waiting.since).min()
    }

    fn birth(
        &mut self,
        address: &Address<'_>,
        topic: &str,
        payload: Payload,
        told: &mut Vec<Told>,
    ) {
        let Some(place) = place(&payload) else {
            told.push(refused(
                topic,
                Reason::Malformed,
                "a birth has no place in the sequence",
            ));
            return;
        };
        // What still waits belongs to the life before.
        for (_, waiting) in std::mem::take(&mut self.waiting) {
            let detail = "the node was born again while the message waited for one before it";
            told.push(refused(&waiting.topic, Reason::OutOfSequence, detail));
        }
        let asked = self.asked;
        *self = Self {
            next: Some(place.wrapping_add(1)),
            session: session(&payload),
            asked,
            ..Self::default()
        };
        self.learn(address, topic, payload, told);
    }

    fn death(&mut self, address: &Address<'_>, payload: &Payload, told: &mut Vec<Told>) {
        let other = session(payload);
        if self.next.is_none() || (other.is_some() && other != self.session) {
            return;
        }
        *self = Self {
            asked: self.asked,
            ..Self::default()
        };
        told.push(gone(address, None));
    }

    /// Takes a message in its turn.
    fn in_sequence(
        &mut self,
        address: &Address<'_>,
        topic: &str,
        payload: Payload,
        now: Time,
        rebirth: Rebirth,
        told: &mut Vec<Told>,
    ) {
        let Some(next) = self.next else {
            let detail = "the edge node has not been born since evenrow listens";
            told.push(refused(topic, Reason::Unborn, detail));
            self.ask(address.group, address.node, now, rebirth, told);
            return;
        };
        let Some(place) = place(&payload) else {
            told.push(refused(
                topic,
                Reason::Malformed,
                "the message has no place in the sequence",
            ));
            return;
        };
        let ahead = place.wrapping_sub(next);
        if ahead == 0 {
            self.apply(address, topic, payload, told);
            self.next = Some(next.wrapping_add(1));
            self.follow(told);
        } else if ahead < HALF && !self.waiting.contains_key(&place) {
            let topic = topic.to_owned();
            self.waiting.insert(
                place,
                Waiting {
                    since: now,
                    topic,
                    payload,
                },
            );
        } else {
            let detail =
                format!("its place in the sequence, {place}, is taken or has been given up");
            told.push(refused(topic, Reason::OutOfSequence, detail));
        }
    }

    /// Takes what waited for the message that has just come.
    fn follow(&mut self, told: &mut Vec<Told>) {
        while let Some(next) = self.next
            && let Some(Waiting { topic, payload, .. }) = self.waiting.remove(&next)
        {
            if let Some(address) = Address::of(&topic) {
                self.apply(&address, &topic, payload, told);
            }
            self.next = Some(next.wrapping_add(1));
        }
    }

    /// Goes on with the nearest message that waits.
    fn give_up(&mut self, told: &mut Vec<Told>) {
        let Some(next) = self.next else {
            return;
        };
        let nearest = self
            .waiting
            .keys()
            .copied()
            .min_by_key(|place| place.wrapping_sub(next));
        if nearest.is_some() {
            self.next = nearest;
            self.follow(told);
        }
    }

    fn ask(&mut self, group: &str, node: &str, now: Time, rebirth: Rebirth, told: &mut Vec<Told>) {
        let lately = self.asked.is_some_and(|at| now.us_since(at) < ASK_EVERY_US);
        if rebirth == Rebirth::Wait || lately {
            return;
        }
        self.asked = Some(now);
        let metric = Metric {
            name: Some("Node Control/Rebirth".to_owned()),
            // Boolean (§6.4.16).
            datatype: Some(11),
            value: Some(Given::Boolean(true)),
            ..Metric::default()
        };
        let ms = u64::try_from(now.us() / 1000).ok();
        let payload = Payload {
            timestamp: ms,
            metrics: vec![metric],
            seq: None,
        };
        told.push(Told::Ask {
            topic: format!("{NAMESPACE}/{group}/NCMD/{node}"),
            payload: payload.encode_to_vec(),
        });
    }

    fn apply(
        &mut self,
        address: &Address<'_>,
        topic: &str,
        payload: Payload,
        told: &mut Vec<Told>,
    ) {
        match address.kind {
            Kind::DeviceBirth => {
                let device = address.device.map(str::to_owned);
                if let Some(before) = self.born.remove(&device) {
                    self.metrics = self.metrics.saturating_sub(before.types.len());
                }
                self.learn(address, topic, payload, told);
            }
            Kind::DeviceDeath => {
                self.born.remove(&address.device.map(str::to_owned));
                told.push(gone(address, address.device));
            }
            _ => self.data(address, topic, payload, told),
        }
    }

    /// Learns names, aliases and types from a birth.
    fn learn(
        &mut self,
        address: &Address<'_>,
        topic: &str,
        payload: Payload,
        told: &mut Vec<Told>,
    ) {
        if self.metrics + payload.metrics.len() > MOST_METRICS {
            let detail = format!("the edge node has more than {MOST_METRICS} metrics");
            told.push(refused(topic, Reason::TooLarge, detail));
            return;
        }
        let mut device = Device::default();
        let mut known = HashMap::new();
        for metric in payload.metrics {
            let Some(name) = metric.name.as_deref().map(Arc::<str>::from) else {
                continue;
            };
            if let Some(alias) = metric.alias {
                self.aliases.insert(alias, (name.clone(), metric.datatype));
            }
            if let Ok(number) = whole(&metric, metric.datatype) {
                known.insert(name.clone(), number);
            }
            device.types.insert(name, metric.datatype);
        }
        self.metrics += device.types.len();
        device.known = Arc::new(known);
        self.born.insert(address.device.map(str::to_owned), device);
    }

    fn data(&mut self, address: &Address<'_>, topic: &str, payload: Payload, told: &mut Vec<Told>) {
        let Some(device) = self.born.get_mut(&address.device.map(str::to_owned)) else {
            let detail = "the device has not been born";
            told.push(refused(topic, Reason::Unborn, detail));
            return;
        };
        let sent = match payload.timestamp.map(time).transpose() {
            Ok(sent) => sent,
            Err(fault) => {
                told.push(Told::Refused {
                    topic: topic.to_owned(),
                    fault,
                });
                return;
            }
        };
        let mut metrics = Vec::with_capacity(payload.metrics.len());
        for metric in payload.metrics {
            let found = match (metric.name.as_deref(), metric.alias) {
                (Some(name), _) => {
                    let known = device.types.get_key_value(name);
                    Some(known.map_or_else(|| (name.into(), None), |(n, t)| (n.clone(), *t)))
                }
                (None, Some(alias)) => self.aliases.get(&alias).cloned(),
                (None, None) => None,
            };
            let Some((name, datatype)) = found else {
                let detail = "a metric has neither a name nor an alias that a birth gave";
                told.push(refused(topic, Reason::Unborn, detail));
                continue;
            };
            let datatype = metric.datatype.or(datatype);
            metrics.push(Named {
                name,
                datatype,
                metric,
            });
        }
        // Kept for data that does not repeat them, historical values aside.
        let known = Arc::make_mut(&mut device.known);
        for Named {
            name,
            datatype,
            metric,
        } in &metrics
        {
            let live = metric.is_historical != Some(true);
            if let (true, Some(last)) = (live, known.get_mut(name))
                && let Ok(number) = whole(metric, *datatype)
            {
                *last = number;
            }
        }
        let known = device.known.clone();
        told.push(Told::Data(Heard {
            topic: topic.to_owned(),
            sent,
            metrics,
            known,
        }));
    }
}

fn gone(address: &Address<'_>, device: Option<&str>) -> Told {
    Told::Gone {
        group: address.group.to_owned(),
        node: address.node.to_owned(),
        device: device.map(str::to_owned),
    }
}

fn refused(topic: &str, reason: Reason, detail: impl Into<String>) -> Told {
    Told::Refused {
        topic: topic.to_owned(),
        fault: Fault::new(reason, detail),
    }
}

fn place(payload: &Payload) -> Option<u8> {
    payload.seq.and_then(|seq| u8::try_from(seq).ok())
}

/// The number of the session, in births and deaths alike.
fn session(payload: &Payload) -> Option<i64> {
    let found = payload
        .metrics
        .iter()
        .find(|metric| metric.name.as_deref() == Some("bdSeq"))?;
    whole(found, found.datatype).ok()
}
