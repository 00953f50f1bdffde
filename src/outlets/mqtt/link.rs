//! One connection to the broker, in either version of the protocol, reduced to what an outlet needs.
//!
//! A connection is made once and thrown away when it fails: a new one starts with an empty session
//! and an empty client, so nothing stale of the one before (packet ids, pending events) survives.
//! Everything is published with QoS 1 and retained.

use rumqttc::v5::mqttbytes::v5::{
    LastWill as LastWill5, LastWillProperties, Packet as Packet5, PubAckReason, PublishProperties,
};
use rumqttc::v5::{AsyncClient as Client5, Event as Event5, EventLoop as Loop5};
use rumqttc::{AsyncClient as Client4, Event as Event4, EventLoop as Loop4, Outgoing, Packet};

use crate::settings::connection::{
    Secrets, network_options_v4, options_v4, options_v5, trouble_v4, trouble_v5,
};
use crate::settings::{Broker, Protocol};

/// Requests that may wait inside the client: one publication, one status, one disconnect.
const CAPACITY: usize = 8;

/// What is published.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Message {
    /// Where to.
    pub topic: String,
    /// What; empty takes back what was retained.
    pub payload: Vec<u8>,
    /// Its media type, told where the protocol can (MQTT 5).
    pub content_type: &'static str,
}

/// What the connection says.
#[derive(Debug, PartialEq, Eq)]
pub enum Signal {
    /// The broker has accepted us.
    Connected,
    /// The broker has confirmed the oldest publication.
    Confirmed,
    /// The broker has taken the oldest publication and will not pass it on; says why.
    Denied(String),
    /// Our goodbye has left.
    Disconnected,
    /// Nothing that matters here.
    Other,
}

/// The end that speaks.
pub enum Speaker {
    /// MQTT 3.1.1.
    V4(Client4),
    /// MQTT 5.
    V5(Client5),
}

/// The end that must be polled for anything to happen.
pub enum Driver {
    /// MQTT 3.1.1.
    V4(Box<Loop4>),
    /// MQTT 5.
    V5(Box<Loop5>),
}

/// A connection that is made when the driver is first polled. `will` is what the broker publishes
/// when we vanish.
pub fn open(
    broker: &Broker,
    client_id: &str,
    secrets: &Secrets,
    will: Message,
) -> (Speaker, Driver) {
    match broker.protocol {
        Protocol::V4 => {
            let mut options = options_v4(broker, client_id, secrets);
            let will =
                rumqttc::LastWill::new(will.topic, will.payload, rumqttc::QoS::AtLeastOnce, true);
            options.set_clean_session(true).set_last_will(will);
            let (client, mut driver) = Client4::new(options, CAPACITY);
            driver.set_network_options(network_options_v4());
            (Speaker::V4(client), Driver::V4(Box::new(driver)))
        }
        Protocol::V5 => {
            let mut options = options_v5(broker, client_id, secrets);
            let properties = LastWillProperties {
                delay_interval: None,
                payload_format_indicator: Some(1),
                message_expiry_interval: None,
                content_type: Some(will.content_type.to_owned()),
                response_topic: None,
                correlation_data: None,
                user_properties: Vec::new(),
            };
            let qos = rumqttc::v5::mqttbytes::QoS::AtLeastOnce;
            let will = LastWill5::new(will.topic, will.payload, qos, true, Some(properties));
            options.set_clean_start(true).set_last_will(will);
            let (client, driver) = Client5::new(options, CAPACITY);
            (Speaker::V5(client), Driver::V5(Box::new(driver)))
        }
    }
}

impl Speaker {
    /// Hands a message to the connection.
    ///
    /// # Errors
    /// When the client takes no more, which says that the driver was not polled.
    pub fn publish(&self, message: Message) -> Result<(), String> {
        let Message {
            topic,
            payload,
            content_type,
        } = message;
        match self {
            Self::V4(client) => client
                .try_publish(topic, rumqttc::QoS::AtLeastOnce, true, payload)
                .map_err(|e| e.to_string()),
            Self::V5(client) => {
                let qos = rumqttc::v5::mqttbytes::QoS::AtLeastOnce;
                let properties = PublishProperties {
                    payload_format_indicator: Some(1),
                    content_type: Some(content_type.to_owned()),
                    ..PublishProperties::default()
                };
                client
                    .try_publish_with_properties(topic, qos, true, payload, properties)
                    .map_err(|e| e.to_string())
            }
        }
    }

    /// Says goodbye, so that the broker drops the last will.
    ///
    /// # Errors
    /// As for [`Self::publish`].
    pub fn disconnect(&self) -> Result<(), String> {
        match self {
            Self::V4(client) => client.try_disconnect().map_err(|e| e.to_string()),
            Self::V5(client) => client.try_disconnect().map_err(|e| e.to_string()),
        }
    }
}

impl Driver {
    /// Waits for the next thing that happens.
    ///
    /// # Errors
    /// When the connection failed, in words for people.
    pub async fn poll(&mut self) -> Result<Signal, String> {
        match self {
            Self::V4(driver) => match driver.poll().await {
                Ok(Event4::Incoming(Packet::ConnAck(_))) => Ok(Signal::Connected),
                Ok(Event4::Incoming(Packet::PubAck(_))) => Ok(Signal::Confirmed),
                Ok(Event4::Outgoing(Outgoing::Disconnect)) => Ok(Signal::Disconnected),
                Ok(_) => Ok(Signal::Other),
                Err(e) => Err(trouble_v4(&e)),
            },
            Self::V5(driver) => match driver.poll().await {
                Ok(Event5::Incoming(Packet5::ConnAck(_))) => Ok(Signal::Connected),
                Ok(Event5::Incoming(Packet5::PubAck(ack))) => Ok(judged(ack.reason)),
                Ok(Event5::Outgoing(Outgoing::Disconnect)) => Ok(Signal::Disconnected),
                Ok(_) => Ok(Signal::Other),
                Err(e) => Err(trouble_v5(&e)),
            },
        }
    }
}

fn judged(reason: PubAckReason) -> Signal {
    match reason {
        PubAckReason::Success | PubAckReason::NoMatchingSubscribers => Signal::Confirmed,
        PubAckReason::NotAuthorized => Signal::Denied(
            "the broker does not allow this client to publish under `evenrow/`; check its access list"
                .to_owned(),
        ),
        other => Signal::Denied(format!("the broker does not take what is published: {other:?}")),
    }
}
