//! Why the broker cannot be reached or does not do what is asked, in words for operators: what is
//! wrong, where, and what to do.

use std::error::Error as StdError;
use std::io;

use rumqttc::v5::mqttbytes::v5 as five;
use rumqttc::{TlsError, v5};
use rustls::{AlertDescription, CertificateError};

use crate::settings::Broker;

use super::link::Place;

/// Why a connection by MQTT 5 was not made or is gone.
pub(super) fn lost_v5(error: &v5::ConnectionError, broker: &Broker, at: Place) -> String {
    use v5::{ConnectionError, StateError};
    match error {
        ConnectionError::ConnectionRefused(code)
        | ConnectionError::MqttState(StateError::ConnFail { reason: code }) => {
            refused(refusal_v5(code), broker)
        }
        ConnectionError::Timeout(_) => no_answer(broker),
        ConnectionError::Tls(error) => tls(error, broker, at),
        ConnectionError::Io(error)
        | ConnectionError::MqttState(
            StateError::Io(error) | StateError::Deserialization(v5::mqttbytes::Error::Io(error)),
        ) => unreachable(error, broker, at),
        ConnectionError::MqttState(StateError::ServerDisconnect {
            reason_code,
            reason_string,
        }) => {
            let more = reason_string.as_deref().map(|text| format!(" ({text})"));
            farewell(*reason_code, &more.unwrap_or_default(), broker)
        }
        ConnectionError::MqttState(StateError::Deserialization(
            v5::mqttbytes::Error::PayloadSizeLimitExceeded { pkt_size, max },
        )) => oversized(*pkt_size, *max as usize, broker),
        ConnectionError::MqttState(StateError::ConnectionAborted) => closed(broker, at),
        ConnectionError::MqttState(StateError::AwaitPingResp) => silent(broker),
        other => format!(
            "the connection to the broker at {} is lost: {other}",
            place(broker)
        ),
    }
}

/// Why a connection by MQTT 3.1.1 was not made or is gone.
pub(super) fn lost_v4(error: &rumqttc::ConnectionError, broker: &Broker, at: Place) -> String {
    use rumqttc::{ConnectionError, StateError};
    match error {
        ConnectionError::ConnectionRefused(code) => refused(refusal_v4(code), broker),
        ConnectionError::NetworkTimeout => no_answer(broker),
        ConnectionError::Tls(error) => tls(error, broker, at),
        ConnectionError::Io(error)
        | ConnectionError::MqttState(
            StateError::Io(error)
            | StateError::Deserialization(rumqttc::mqttbytes::Error::Io(error)),
        ) => unreachable(error, broker, at),
        ConnectionError::MqttState(StateError::Deserialization(
            rumqttc::mqttbytes::Error::PayloadSizeLimitExceeded(bytes),
        )) => oversized(*bytes, super::link::most_packet_bytes(broker), broker),
        ConnectionError::MqttState(StateError::ConnectionAborted) => closed(broker, at),
        ConnectionError::MqttState(StateError::AwaitPingResp) | ConnectionError::FlushTimeout => {
            silent(broker)
        }
        other => format!(
            "the connection to the broker at {} is lost: {other}",
            place(broker)
        ),
    }
}

/// What is wrong with a subscription by MQTT 5; `None` when nothing is.
pub(super) fn subscribed_v5(code: &five::SubscribeReasonCode) -> Option<&'static str> {
    use five::SubscribeReasonCode as Code;
    match code {
        Code::Success(_) => None,
        Code::NotAuthorized => Some("not authorised"),
        Code::TopicFilterInvalid => Some("the topic is not allowed"),
        Code::QuotaExceeded => Some("too many subscriptions"),
        Code::WildcardSubscriptionsNotSupported => Some("this broker knows no wildcards"),
        _ => Some("no reason given"),
    }
}

/// What is wrong with a subscription by MQTT 3.1.1; `None` when nothing is.
pub(super) fn subscribed_v4(code: &rumqttc::SubscribeReasonCode) -> Option<&'static str> {
    match code {
        rumqttc::SubscribeReasonCode::Success(_) => None,
        rumqttc::SubscribeReasonCode::Failure => Some("most likely not authorised"),
    }
}

/// Where the broker is.
pub(super) fn place(broker: &Broker) -> String {
    format!("{}:{}", broker.host, broker.port)
}

/// Why a broker lets nobody in.
enum Door {
    Login,
    NotAllowed,
    ClientId,
    Version,
    Busy,
    Other(String),
}

fn refusal_v5(code: &five::ConnectReturnCode) -> Door {
    use five::ConnectReturnCode as Code;
    match code {
        Code::BadUserNamePassword | Code::BadAuthenticationMethod => Door::Login,
        Code::NotAuthorized | Code::Banned => Door::NotAllowed,
        Code::BadClientId | Code::ClientIdentifierNotValid => Door::ClientId,
        Code::RefusedProtocolVersion | Code::UnsupportedProtocolVersion => Door::Version,
        Code::ServiceUnavailable
        | Code::ServerUnavailable
        | Code::ServerBusy
        | Code::QuotaExceeded
        | Code::ConnectionRateExceeded => Door::Busy,
        other => Door::Other(format!("{other:?}")),
    }
}

fn refusal_v4(code: &rumqttc::ConnectReturnCode) -> Door {
    use rumqttc::ConnectReturnCode as Code;
    match code {
        Code::BadUserNamePassword => Door::Login,
        Code::NotAuthorized => Door::NotAllowed,
        Code::BadClientId => Door::ClientId,
        Code::RefusedProtocolVersion => Door::Version,
        Code::ServiceUnavailable => Door::Busy,
        Code::Success => Door::Other("without a reason".to_owned()),
    }
}

fn refused(door: Door, broker: &Broker) -> String {
    let place = place(broker);
    match door {
        Door::Login => format!(
            "the broker at {place} refuses user name or password; check broker.user and broker.password_file"
        ),
        // Many brokers answer a wrong password with "not authorised".
        Door::NotAllowed => match &broker.user {
            Some(user) => format!(
                "the broker at {place} does not let '{user}' in; check broker.user, broker.password_file and the broker's access rules"
            ),
            None => format!(
                "the broker at {place} lets nobody in without a user; set broker.user and broker.password_file"
            ),
        },
        Door::ClientId => format!(
            "the broker at {place} refuses the client id '{}'; check broker.client_id",
            broker.client_id
        ),
        Door::Version => format!(
            "the broker at {place} does not speak this version of MQTT; set broker.protocol to the other of 5 and 4"
        ),
        Door::Busy => format!("the broker at {place} takes no further connection at present"),
        Door::Other(why) => format!("the broker at {place} refuses the connection: {why}"),
    }
}

fn farewell(code: five::DisconnectReasonCode, more: &str, broker: &Broker) -> String {
    use five::DisconnectReasonCode as Code;
    let place = place(broker);
    match code {
        Code::SessionTakenOver => format!(
            "another client has taken over the session of client id '{}' at {place}{more}; give each client its own broker.client_id",
            broker.client_id
        ),
        Code::ServerShuttingDown => format!("the broker at {place} is shutting down{more}"),
        Code::KeepAliveTimeout => {
            format!("the broker at {place} heard nothing from here in time{more}")
        }
        Code::NotAuthorized => format!(
            "the broker at {place} has withdrawn the right to connect{more}; check its access rules"
        ),
        other => format!("the broker at {place} ended the connection: {other:?}{more}"),
    }
}

fn no_answer(broker: &Broker) -> String {
    format!(
        "no answer from the broker at {} within 5 s; check address, network and firewall",
        place(broker)
    )
}

fn unreachable(error: &io::Error, broker: &Broker, at: Place) -> String {
    if let Some(words) = in_chain(error, broker) {
        return words;
    }
    let place = place(broker);
    match error.kind() {
        io::ErrorKind::ConnectionRefused => {
            format!("nothing listens at {place}; is the broker running?")
        }
        io::ErrorKind::ConnectionReset
        | io::ErrorKind::ConnectionAborted
        | io::ErrorKind::BrokenPipe
        | io::ErrorKind::UnexpectedEof => closed(broker, at),
        _ => format!("the broker at {place} cannot be reached: {error}"),
    }
}

fn closed(broker: &Broker, at: Place) -> String {
    let place = place(broker);
    match at {
        Place::Inside => format!(
            "the broker at {place} closed the connection; if this repeats, another client may use the client id '{}'",
            broker.client_id
        ),
        Place::Door if broker.tls => format!(
            "the broker at {place} closed the connection before letting us in; it may not speak TLS there, or want a client certificate"
        ),
        Place::Door => format!(
            "the broker at {place} closed the connection before letting us in; it may speak only TLS there (mqtts://)"
        ),
    }
}

fn silent(broker: &Broker) -> String {
    format!(
        "the broker at {} has stopped answering; check the network",
        place(broker)
    )
}

fn oversized(bytes: usize, limit: usize, broker: &Broker) -> String {
    format!(
        "the broker at {} delivers a message of {bytes} bytes, more than the {limit} that can be received; find its publisher, and remove it from the broker's session of client id '{}'",
        place(broker),
        broker.client_id
    )
}

fn tls(error: &TlsError, broker: &Broker, at: Place) -> String {
    let place = place(broker);
    match error {
        TlsError::Io(error) => unreachable(error, broker, at),
        TlsError::TLS(error) => handshake(error, broker),
        TlsError::DNSName(_) => format!(
            "'{}' is no name that a certificate can carry; write the broker's host name in broker.url",
            broker.host
        ),
        other => format!("no encrypted connection to the broker at {place}: {other}"),
    }
}

/// The failures of a handshake that a person can put right.
fn handshake(error: &rustls::Error, broker: &Broker) -> String {
    let place = place(broker);
    let whom = match &broker.ca_file {
        Some(file) => format!("the authorities in {}", file.display()),
        None => "the system's authorities".to_owned(),
    };
    let words = match error {
        rustls::Error::InvalidCertificate(why) => match why {
            CertificateError::UnknownIssuer | CertificateError::BadSignature => {
                format!("its certificate is not signed by {whom}; check broker.ca_file")
            }
            CertificateError::Expired | CertificateError::ExpiredContext { .. } => {
                "its certificate has expired (or the clock here is wrong)".to_owned()
            }
            CertificateError::NotValidYet | CertificateError::NotValidYetContext { .. } => {
                "its certificate is not valid yet (or the clock here is wrong)".to_owned()
            }
            CertificateError::NotValidForName | CertificateError::NotValidForNameContext { .. } => {
                format!(
                    "its certificate is not made out to '{}'; use the name it carries in broker.url",
                    broker.host
                )
            }
            other => format!("its certificate is refused: {other}"),
        },
        rustls::Error::AlertReceived(alert) => match alert {
            AlertDescription::CertificateRequired => {
                "it wants a client certificate; set broker.client_certificate_file and broker.client_key_file".to_owned()
            }
            AlertDescription::UnknownCA
            | AlertDescription::BadCertificate
            | AlertDescription::CertificateUnknown
            | AlertDescription::CertificateRevoked
            | AlertDescription::CertificateExpired
            | AlertDescription::UnsupportedCertificate
            | AlertDescription::DecryptError
            | AlertDescription::AccessDenied => format!(
                "it refuses the client certificate ({alert:?}); check broker.client_certificate_file"
            ),
            other => format!("it ended the handshake: {other:?}"),
        },
        rustls::Error::InvalidMessage(_) => {
            "it does not speak TLS there; use mqtt:// or the port for TLS".to_owned()
        }
        other => other.to_string(),
    };
    format!("no encrypted connection to the broker at {place}: {words}")
}

/// TLS faults that come wrapped, because the broker's last word on our certificate arrives only
/// after the handshake (RFC 8446 §4.4.2.4).
fn in_chain(error: &io::Error, broker: &Broker) -> Option<String> {
    let mut at: Option<&(dyn StdError + 'static)> = Some(error);
    while let Some(error) = at {
        if let Some(error) = error.downcast_ref::<rustls::Error>() {
            return Some(handshake(error, broker));
        }
        at = match error.downcast_ref::<io::Error>() {
            Some(error) => error
                .get_ref()
                .map(|inner| inner as &(dyn StdError + 'static)),
            None => error.source(),
        };
    }
    None
}

#[cfg(test)]
mod tests;
