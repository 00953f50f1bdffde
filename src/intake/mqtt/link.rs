//! One connection to the broker in either version of the protocol, as one set of words.
//!
//! A link lives for one connection and is built anew for the next: so no event, no pending request
//! and no collision of packet ids of an earlier connection can survive into a later one, and files
//! with passwords and certificates are read again. What must hold: nothing here waits except
//! [`Link::next`]. Deliberately absent: when to connect, and what messages mean.

use rumqttc::v5;
use rumqttc::v5::mqttbytes::v5 as five;

use crate::settings::connection::{
    Secrets, network_options_v4, options_v4, options_v5, trouble_v4, trouble_v5,
};
use crate::settings::{Broker, Protocol};

/// Requests that wait to be sent besides acknowledgements: two subscriptions, one disconnection.
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
pub(super) enum Link {
    V5(Box<v5::EventLoop>),
    V4(Box<rumqttc::EventLoop>),
}

/// Sends on a connection without waiting.
pub(super) enum Speaker {
    V5(v5::AsyncClient),
    V4(rumqttc::AsyncClient),
}

/// What a connection is for.
#[derive(Clone, Copy, Debug)]
pub(super) enum Role<'r> {
    /// Measurements in a session that outlives the connection, acknowledged by hand.
    Measurements,
    /// Listening aside, under the client id with this at its end, in a session that ends with the
    /// connection.
    Aside(&'r str),
}

/// Whether a subscription asks for what was published before it.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Retained {
    Wanted,
    Unwanted,
}

/// The queue of requests is full; try again when some have been sent.
#[derive(Debug)]
pub(super) struct Full;

impl Link {
    /// Prepares a connection; it is made when [`Link::next`] is first called.
    pub(super) fn new(broker: &Broker, secrets: &Secrets, role: Role<'_>) -> (Self, Speaker) {
        let requests =
            usize::from(broker.receive_maximum).max(LEAST_ACKNOWLEDGEMENTS) + OTHER_REQUESTS;
        match broker.protocol {
            Protocol::V5 => {
                let options = listening_v5(broker, secrets, role);
                let (client, events) = v5::AsyncClient::new(options, requests);
                (Self::V5(Box::new(events)), Speaker::V5(client))
            }
            Protocol::V4 => {
                let options = listening_v4(broker, secrets, role);
                let (client, mut events) = rumqttc::AsyncClient::new(options, requests);
                let mut network = network_options_v4();
                network.set_tcp_nodelay(true);
                events.set_network_options(network);
                (Self::V4(Box::new(events)), Speaker::V4(client))
            }
        }
    }

    /// Waits for what happens next. After an error the link is of no further use.
    ///
    /// # Errors
    /// Says in words for people why the connection was not made or is gone.
    pub(super) async fn next(&mut self) -> Result<Heard, String> {
        match self {
            Self::V5(events) => match events.poll().await {
                Ok(event) => Ok(heard_v5(event)),
                Err(error) => Err(trouble_v5(&error)),
            },
            Self::V4(events) => match events.poll().await {
                Ok(event) => Ok(heard_v4(event)),
                Err(error) => Err(trouble_v4(&error)),
            },
        }
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

    /// Subscribes to all filters at once. Whether retained messages come at once is for MQTT 5 to say;
    /// with 3.1.1 they always do.
    pub(super) fn subscribe(&self, filters: &[String], retained: Retained) -> Result<(), Full> {
        match self {
            Self::V5(client) => {
                let filter = |path: &String| five::Filter {
                    retain_forward_rule: match retained {
                        Retained::Wanted => five::RetainForwardRule::OnEverySubscribe,
                        Retained::Unwanted => five::RetainForwardRule::Never,
                    },
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

    /// Subscribes to all filters at once with QoS 0 and without what was retained.
    pub(super) fn subscribe_aside(&self, filters: &[String]) -> Result<(), Full> {
        match self {
            Self::V5(client) => {
                let filter = |path: &String| five::Filter {
                    retain_forward_rule: five::RetainForwardRule::Never,
                    ..five::Filter::new(path, v5::mqttbytes::QoS::AtMostOnce)
                };
                let filters = filters.iter().map(filter);
                client.try_subscribe_many(filters).map_err(|_| Full)
            }
            Self::V4(client) => {
                let filter = |path: &String| {
                    rumqttc::SubscribeFilter::new(path.clone(), rumqttc::QoS::AtMostOnce)
                };
                let filters = filters.iter().map(filter);
                client.try_subscribe_many(filters).map_err(|_| Full)
            }
        }
    }

    /// Publishes with QoS 0, not retained.
    pub(super) fn publish(&self, topic: &str, payload: Vec<u8>) -> Result<(), Full> {
        match self {
            Self::V5(client) => {
                let qos = v5::mqttbytes::QoS::AtMostOnce;
                client
                    .try_publish(topic, qos, false, payload)
                    .map_err(|_| Full)
            }
            Self::V4(client) => {
                let qos = rumqttc::QoS::AtMostOnce;
                client
                    .try_publish(topic, qos, false, payload)
                    .map_err(|_| Full)
            }
        }
    }

    /// Says farewell; the broker keeps a session that is to be kept.
    pub(super) fn disconnect(&self) -> Result<(), Full> {
        match self {
            Self::V5(client) => client.try_disconnect().map_err(|_| Full),
            Self::V4(client) => client.try_disconnect().map_err(|_| Full),
        }
    }
}

fn listening_v5(broker: &Broker, secrets: &Secrets, role: Role<'_>) -> v5::MqttOptions {
    let mut options = options_v5(broker, &client_id(broker, role), secrets);
    let mut network = options.network_options();
    network.set_tcp_nodelay(true);
    options
        .set_network_options(network)
        .set_outgoing_inflight_upper_limit(OUTGOING)
        .set_receive_maximum(Some(broker.receive_maximum.max(1)));
    match role {
        Role::Measurements => options
            .set_clean_start(false)
            .set_manual_acks(true)
            .set_session_expiry_interval(Some(broker.session_expiry_s)),
        Role::Aside(_) => options.set_clean_start(true),
    };
    options
}

fn listening_v4(broker: &Broker, secrets: &Secrets, role: Role<'_>) -> rumqttc::MqttOptions {
    let mut options = options_v4(broker, &client_id(broker, role), secrets);
    options.set_inflight(OUTGOING);
    match role {
        Role::Measurements => options
            // Without a client id there is no session to keep; the settings require one.
            .set_clean_session(broker.client_id.is_empty())
            .set_manual_acks(true),
        Role::Aside(_) => options.set_clean_session(true),
    };
    options
}

fn client_id(broker: &Broker, role: Role<'_>) -> String {
    match role {
        Role::Measurements => broker.client_id.clone(),
        Role::Aside(end) => format!("{}{end}", broker.client_id),
    }
}

/// What is wrong with a subscription by MQTT 5; `None` when nothing is.
fn subscribed_v5(code: &five::SubscribeReasonCode) -> Option<&'static str> {
    use five::SubscribeReasonCode as Code;
    match code {
        Code::Success(_) => None,
        Code::NotAuthorized => Some("not allowed"),
        Code::TopicFilterInvalid => Some("no topic for this broker"),
        Code::QuotaExceeded => Some("too many subscriptions"),
        Code::WildcardSubscriptionsNotSupported => Some("this broker knows no wildcards"),
        _ => Some("no reason given"),
    }
}

/// What is wrong with a subscription by MQTT 3.1.1; `None` when nothing is.
fn subscribed_v4(code: &rumqttc::SubscribeReasonCode) -> Option<&'static str> {
    match code {
        rumqttc::SubscribeReasonCode::Success(_) => None,
        rumqttc::SubscribeReasonCode::Failure => Some("most likely not allowed"),
    }
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
        v5::Event::Incoming(five::Packet::SubAck(answer)) => {
            Heard::Subscribed(answer.return_codes.iter().map(subscribed_v5).collect())
        }
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
        rumqttc::Event::Incoming(rumqttc::Packet::SubAck(answer)) => {
            Heard::Subscribed(answer.return_codes.iter().map(subscribed_v4).collect())
        }
        rumqttc::Event::Outgoing(rumqttc::Outgoing::Disconnect) => Heard::Disconnected,
        _ => Heard::Nothing,
    }
}
