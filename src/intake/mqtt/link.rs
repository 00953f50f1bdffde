//! One connection to the broker in either version of the protocol, as one set of words.
//!
//! A link lives for one connection and is built anew for the next: so no event, no pending request
//! and no collision of packet ids of an earlier connection can survive into a later one, and files
//! with passwords and certificates are read again. What must hold: nothing here waits except
//! [`Link::next`]. Deliberately absent: when to connect, and what messages mean.

use std::sync::Arc;
use std::time::Duration;

use rumqttc::v5::mqttbytes::v5 as five;
use rumqttc::{TlsConfiguration, Transport, v5};

use crate::settings::{Broker, Protocol};

use super::access::Access;
use super::words;

/// The client's own limit on a packet. It lies far above what is decoded (`most_bytes`), so that a
/// large message is refused, counted and acknowledged instead of breaking the connection over and
/// over; beyond this a broker that speaks MQTT 5 drops the message (§3.1.2.11.4).
const MOST_PACKET_BYTES: usize = 16 << 20;
/// Requests that wait to be sent besides acknowledgements: one subscription, one disconnection.
const OTHER_REQUESTS: usize = 8;
/// MQTT 3.1.1 has no receive maximum; brokers keep 20 to a few hundred messages under way.
const LEAST_ACKNOWLEDGEMENTS: usize = 1024;
/// We publish nothing here, so the table of outgoing messages can be small.
const OUTGOING: u16 = 8;

/// What happens on a connection.
#[derive(Debug)]
pub(super) enum Heard {
    /// The broker let us in.
    Connected {
        /// Whether it kept our session.
        session_present: bool,
    },
    /// A message.
    Message(Message),
    /// The answer to the subscription, in the order of the filters: what is wrong with each.
    Subscribed(Vec<Option<&'static str>>),
    /// Our farewell is on its way.
    Disconnected,
    /// Nothing of interest.
    Nothing,
}

/// A message as the wire gives it.
#[derive(Debug)]
pub(super) struct Message {
    pub(super) topic: String,
    pub(super) payload: Vec<u8>,
    /// The packet id; `None` for QoS 0.
    pub(super) packet: Option<u16>,
    pub(super) dup: bool,
    pub(super) retain: bool,
}

/// A connection.
pub(super) struct Link {
    wire: Wire,
    /// How far we came, for the words about its end.
    place: Place,
}

/// How far a connection came before it ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Place {
    /// The broker has not let us in yet.
    Door,
    /// It had let us in.
    Inside,
}

enum Wire {
    V5(Box<v5::EventLoop>),
    V4(Box<rumqttc::EventLoop>),
}

/// Sends on a connection without waiting.
pub(super) enum Speaker {
    V5(v5::AsyncClient),
    V4(rumqttc::AsyncClient),
}

/// The queue of requests is full; try again when some have been sent.
#[derive(Debug)]
pub(super) struct Full;

impl Link {
    /// Prepares a connection; it is made when [`Link::next`] is first called.
    pub(super) fn new(broker: &Broker, access: Access) -> (Self, Speaker) {
        let requests =
            usize::from(broker.receive_maximum).max(LEAST_ACKNOWLEDGEMENTS) + OTHER_REQUESTS;
        let (wire, speaker) = match broker.protocol {
            Protocol::V5 => {
                let (client, events) = v5::AsyncClient::new(options_v5(broker, access), requests);
                (Wire::V5(Box::new(events)), Speaker::V5(client))
            }
            Protocol::V4 => {
                let (client, mut events) =
                    rumqttc::AsyncClient::new(options_v4(broker, access), requests);
                events.set_network_options(network());
                (Wire::V4(Box::new(events)), Speaker::V4(client))
            }
        };
        let place = Place::Door;
        (Self { wire, place }, speaker)
    }

    /// Waits for what happens next. After an error the link is of no further use.
    ///
    /// # Errors
    /// Says in words for people why the connection was not made or is gone.
    pub(super) async fn next(&mut self, broker: &Broker) -> Result<Heard, String> {
        let heard = match &mut self.wire {
            Wire::V5(events) => match events.poll().await {
                Ok(event) => heard_v5(event),
                Err(error) => return Err(words::lost_v5(&error, broker, self.place)),
            },
            Wire::V4(events) => match events.poll().await {
                Ok(event) => heard_v4(event),
                Err(error) => return Err(words::lost_v4(&error, broker, self.place)),
            },
        };
        if matches!(heard, Heard::Connected { .. }) {
            self.place = Place::Inside;
        }
        Ok(heard)
    }
}

impl Speaker {
    /// Acknowledges a message.
    pub(super) fn acknowledge(&self, packet: u16) -> Result<(), Full> {
        let qos = rumqttc::QoS::AtLeastOnce;
        match self {
            Self::V5(client) => {
                let qos = v5::mqttbytes::QoS::AtLeastOnce;
                let mut publish = five::Publish::new("", qos, Vec::new(), None);
                publish.pkid = packet;
                client.try_ack(&publish).map_err(|_| Full)
            }
            Self::V4(client) => {
                let mut publish = rumqttc::Publish::new("", qos, Vec::new());
                publish.pkid = packet;
                client.try_ack(&publish).map_err(|_| Full)
            }
        }
    }

    /// Subscribes to all filters at once; retained messages are not wanted.
    pub(super) fn subscribe(&self, filters: &[String]) -> Result<(), Full> {
        match self {
            Self::V5(client) => {
                let filter = |path: &String| five::Filter {
                    retain_forward_rule: five::RetainForwardRule::Never,
                    ..five::Filter::new(path, v5::mqttbytes::QoS::AtLeastOnce)
                };
                let filters = filters.iter().map(filter);
                client.try_subscribe_many(filters).map_err(|_| Full)
            }
            Self::V4(client) => {
                let filter = |path: &String| {
                    rumqttc::SubscribeFilter::new(path.clone(), rumqttc::QoS::AtLeastOnce)
                };
                let filters = filters.iter().map(filter);
                client.try_subscribe_many(filters).map_err(|_| Full)
            }
        }
    }

    /// Says farewell; the broker keeps the session.
    pub(super) fn disconnect(&self) -> Result<(), Full> {
        match self {
            Self::V5(client) => client.try_disconnect().map_err(|_| Full),
            Self::V4(client) => client.try_disconnect().map_err(|_| Full),
        }
    }
}

/// Small acknowledgements should not wait for company.
fn network() -> rumqttc::NetworkOptions {
    let mut options = rumqttc::NetworkOptions::new();
    options.set_tcp_nodelay(true);
    options
}

/// An IPv6 address goes in brackets where a port follows.
fn host(broker: &Broker) -> String {
    if broker.host.contains(':') && !broker.host.starts_with('[') {
        format!("[{}]", broker.host)
    } else {
        broker.host.clone()
    }
}

/// Five seconds is the least that the client library takes.
fn keep_alive(broker: &Broker) -> Duration {
    Duration::from_secs(u64::from(broker.keep_alive_s.max(5)))
}

fn transport(tls: Option<Arc<rustls::ClientConfig>>) -> Transport {
    match tls {
        Some(config) => Transport::tls_with_config(TlsConfiguration::Rustls(config)),
        None => Transport::tcp(),
    }
}

pub(super) fn most_packet_bytes(broker: &Broker) -> usize {
    // The topic and the header come on top of the payload.
    MOST_PACKET_BYTES.max(broker.most_bytes.saturating_add(1 << 17))
}

fn options_v5(broker: &Broker, access: Access) -> v5::MqttOptions {
    let mut options = v5::MqttOptions::new(&broker.client_id, host(broker), broker.port);
    options
        .set_keep_alive(keep_alive(broker))
        .set_clean_start(false)
        .set_manual_acks(true)
        .set_transport(transport(access.tls))
        .set_network_options(network())
        .set_outgoing_inflight_upper_limit(OUTGOING)
        .set_session_expiry_interval(Some(broker.session_expiry_s))
        .set_receive_maximum(Some(broker.receive_maximum.max(1)))
        .set_max_packet_size(Some(
            u32::try_from(most_packet_bytes(broker)).unwrap_or(u32::MAX),
        ));
    if let Some((user, password)) = access.login {
        options.set_credentials(user, password);
    }
    options
}

fn options_v4(broker: &Broker, access: Access) -> rumqttc::MqttOptions {
    let mut options = rumqttc::MqttOptions::new(&broker.client_id, host(broker), broker.port);
    let most = most_packet_bytes(broker);
    options
        .set_keep_alive(keep_alive(broker))
        // Without a client id there is no session to keep; the settings require one.
        .set_clean_session(broker.client_id.is_empty())
        .set_manual_acks(true)
        .set_transport(transport(access.tls))
        .set_inflight(OUTGOING)
        .set_max_packet_size(most, most);
    if let Some((user, password)) = access.login {
        options.set_credentials(user, password);
    }
    options
}

fn heard_v5(event: v5::Event) -> Heard {
    match event {
        v5::Event::Incoming(five::Packet::ConnAck(answer)) => Heard::Connected {
            session_present: answer.session_present,
        },
        v5::Event::Incoming(five::Packet::Publish(publish)) => Heard::Message(Message {
            topic: String::from_utf8_lossy(&publish.topic).into_owned(),
            payload: publish.payload.to_vec(),
            packet: (publish.pkid != 0).then_some(publish.pkid),
            dup: publish.dup,
            retain: publish.retain,
        }),
        v5::Event::Incoming(five::Packet::SubAck(answer)) => Heard::Subscribed(
            answer
                .return_codes
                .iter()
                .map(words::subscribed_v5)
                .collect(),
        ),
        v5::Event::Outgoing(rumqttc::Outgoing::Disconnect) => Heard::Disconnected,
        _ => Heard::Nothing,
    }
}

fn heard_v4(event: rumqttc::Event) -> Heard {
    match event {
        rumqttc::Event::Incoming(rumqttc::Packet::ConnAck(answer)) => Heard::Connected {
            session_present: answer.session_present,
        },
        rumqttc::Event::Incoming(rumqttc::Packet::Publish(publish)) => Heard::Message(Message {
            topic: publish.topic,
            payload: publish.payload.to_vec(),
            packet: (publish.pkid != 0).then_some(publish.pkid),
            dup: publish.dup,
            retain: publish.retain,
        }),
        rumqttc::Event::Incoming(rumqttc::Packet::SubAck(answer)) => Heard::Subscribed(
            answer
                .return_codes
                .iter()
                .map(words::subscribed_v4)
                .collect(),
        ),
        rumqttc::Event::Outgoing(rumqttc::Outgoing::Disconnect) => Heard::Disconnected,
        _ => Heard::Nothing,
    }
}
