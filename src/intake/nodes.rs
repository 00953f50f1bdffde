//! Messages of Sparkplug edge nodes as they arrived: their measurements and refusals for every bank,
//! and what is to be published in return.
//!
//! Pure: bytes and `now` in, words out. What must hold: every message of a subscribed node goes through the
//! session, also those of devices that belong to no bank, because all of a node's messages share one
//! sequence. Such a message is nobody's measurement and is not counted. Deliberately absent:
//! acknowledgements; the nodes publish with QoS 0 into a session that begins anew with each connection.

use crate::model::{Reason, Refusal, Time};
use crate::settings::{Feed, PayloadForm, Rebirth, SparkplugForm, TopicTemplate};

use super::arrival::{Arrival, From, Receipt, enter};
use super::names::Names;
use super::payload::sparkplug::{Session, Told, measurements};
use super::payload::{Fault, excerpt};
use super::topics::Topics;

/// Nothing to acknowledge.
const NO_RECEIPT: Receipt = Receipt {
    epoch: 0,
    packet: None,
    hash: 0,
};

/// The edge nodes of all banks that Sparkplug feeds.
#[derive(Debug)]
pub struct Nodes {
    feeds: Vec<(Feed, SparkplugForm)>,
    session: Session,
    topics: Topics,
    filters: Topics,
    names: Names,
    most_bytes: usize,
}

/// What came of a message, or of time.
#[derive(Clone, Debug, PartialEq)]
pub struct Outcome {
    /// Measurements and refusals; there may be none.
    pub arrival: Arrival,
    /// Topics and payloads to publish.
    pub publish: Vec<(String, Vec<u8>)>,
    /// Who is gone, in words for people: nothing fresh comes from there until the next birth.
    pub gone: Vec<String>,
}

impl Nodes {
    /// For the feeds of Sparkplug among these; `None` when there is none.
    pub fn new(feeds: &[Feed], most_bytes: usize) -> Option<Self> {
        let own = |feed: &Feed| match &feed.payload {
            PayloadForm::Sparkplug(form) => Some((feed.clone(), form.clone())),
            _ => None,
        };
        let feeds: Vec<_> = feeds.iter().filter_map(own).collect();
        let reorder_us = feeds.iter().map(|(_, form)| form.reorder_us).max()?;
        let asks = feeds.iter().any(|(_, form)| form.rebirth == Rebirth::Ask);
        let rebirth = if asks { Rebirth::Ask } else { Rebirth::Wait };
        let whole: Vec<Feed> = feeds.iter().map(|(feed, _)| whole_node(feed)).collect();
        Some(Self {
            session: Session::new(reorder_us, rebirth),
            topics: Topics::new(feeds.iter().map(|(feed, _)| feed)),
            filters: Topics::new(&whole),
            names: Names::default(),
            feeds,
            most_bytes,
        })
    }

    /// The filters to subscribe: everything of the nodes.
    pub fn filters(&self) -> &[String] {
        self.filters.filters()
    }

    /// A connection begins.
    pub fn connected(&mut self) {
        self.session.connected();
    }

    /// A message arrives.
    pub fn take(&mut self, topic: &str, payload: &[u8], now: Time) -> Outcome {
        if payload.len() > self.most_bytes {
            let (got, most) = (payload.len(), self.most_bytes);
            let detail = format!("the payload has {got} bytes, the limit is {most}");
            return self.refused(topic, Fault::new(Reason::TooLarge, detail));
        }
        let told = self.session.take(topic, payload, now);
        self.outcome(told)
    }

    /// Refuses a message that is not even looked into.
    pub fn refused(&mut self, topic: &str, fault: Fault) -> Outcome {
        let topic = topic.to_owned();
        self.outcome(vec![Told::Refused { topic, fault }])
    }

    /// When [`Nodes::tick`] has something to do.
    pub fn deadline(&self) -> Option<Time> {
        self.session.deadline()
    }

    /// Time has come.
    pub fn tick(&mut self, now: Time) -> Outcome {
        let told = self.session.tick(now);
        self.outcome(told)
    }

    fn outcome(&mut self, told: Vec<Told>) -> Outcome {
        let mut outcome = Outcome {
            arrival: Arrival::empty(NO_RECEIPT),
            publish: Vec::new(),
            gone: Vec::new(),
        };
        for one in told {
            match one {
                Told::Data(heard) => {
                    for (bank, source) in self.topics.route(&heard.topic) {
                        let Some((feed, form)) = self.feeds.iter().find(|(f, _)| f.bank == bank)
                        else {
                            continue;
                        };
                        // Bytes of protobuf tell people nothing.
                        let from = From {
                            bank,
                            topic: &heard.topic,
                            payload: b"",
                        };
                        let decoded = measurements(form, &heard, source);
                        let arrival = &mut outcome.arrival;
                        enter(arrival, from, &feed.belief, decoded, &mut self.names);
                    }
                }
                Told::Refused { topic, fault } => self.refuse(&topic, &fault, &mut outcome.arrival),
                Told::Gone {
                    group,
                    node,
                    device,
                } => outcome.gone.push(match device {
                    Some(device) => format!("device {device} of edge node {node} in {group}"),
                    None => format!("edge node {node} in {group}"),
                }),
                Told::Ask { topic, payload } => outcome.publish.push((topic, payload)),
            }
        }
        outcome
    }

    /// Refuses a message for every bank that it concerns. What is broken is counted even when it is of
    /// no bank's device.
    fn refuse(&mut self, topic: &str, fault: &Fault, arrival: &mut Arrival) {
        let shown = self.names.shared(&excerpt(topic.as_bytes()));
        let refusal = |bank| Refusal {
            bank,
            reason: fault.reason,
            topic: shown.clone(),
            detail: fault.detail.clone(),
            excerpt: String::new(),
        };
        let before = arrival.refusals.len();
        let banks = self.topics.route(topic).map(|(bank, _)| Some(bank));
        arrival.refusals.extend(banks.map(refusal));
        let others = matches!(fault.reason, Reason::Unborn | Reason::OutOfSequence);
        if arrival.refusals.len() == before && !others {
            arrival.refusals.push(refusal(None));
        }
    }
}

/// The feed with the topics of its whole edge node.
fn whole_node(feed: &Feed) -> Feed {
    let plain = |level: &String| match level.as_str() {
        "{source}" => "+".to_owned(),
        other => other.to_owned(),
    };
    let mut levels: Vec<String> = feed.topic.levels.iter().take(4).map(plain).collect();
    levels.push("#".to_owned());
    Feed {
        topic: TopicTemplate {
            levels,
            source_level: None,
        },
        ..feed.clone()
    }
}
