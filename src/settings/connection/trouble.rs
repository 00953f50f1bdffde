//! Why a connection failed, in words an operator can act on. The client's own errors name its
//! internals; these name the setting to look at.

use std::io;

use rumqttc::v5::mqttbytes::v5::{ConnectReturnCode as Code5, DisconnectReasonCode as Farewell};
use rumqttc::{ConnectReturnCode as Code4, TlsError};
use rustls::AlertDescription;

/// A failed connection with MQTT 5, in words.
pub fn trouble_v5(error: &rumqttc::v5::ConnectionError) -> String {
    use rumqttc::v5::mqttbytes::Error as M;
    use rumqttc::v5::{ConnectionError as E, StateError as S};
    match error {
        E::ConnectionRefused(code) => refused_v5(code),
        E::MqttState(S::ConnFail { reason }) => refused_v5(reason),
        E::MqttState(S::Io(e) | S::Deserialization(M::Io(e))) | E::Io(e) => network(e),
        E::MqttState(S::Deserialization(M::PayloadSizeLimitExceeded { pkt_size, max })) => {
            too_large(*pkt_size, Some(*max))
        }
        E::MqttState(S::ConnectionAborted) => closed(),
        E::MqttState(S::AwaitPingResp) => no_answer(),
        E::MqttState(S::ServerDisconnect {
            reason_code,
            reason_string,
        }) => farewell(*reason_code, reason_string.as_deref().unwrap_or_default()),
        E::Timeout(_) => no_answer(),
        E::Tls(e) => tls(e),
        other => other.to_string(),
    }
}

/// A failed connection with MQTT 3.1.1, in words.
pub fn trouble_v4(error: &rumqttc::ConnectionError) -> String {
    use rumqttc::mqttbytes::Error as M;
    use rumqttc::{ConnectionError as E, StateError as S};
    match error {
        E::ConnectionRefused(code) => refused_v4(*code),
        E::MqttState(S::Io(e) | S::Deserialization(M::Io(e))) | E::Io(e) => network(e),
        E::MqttState(S::Deserialization(M::PayloadSizeLimitExceeded(bytes))) => {
            too_large(*bytes, None)
        }
        E::MqttState(S::ConnectionAborted) => closed(),
        E::MqttState(S::AwaitPingResp) | E::NetworkTimeout | E::FlushTimeout => no_answer(),
        E::Tls(e) => tls(e),
        other => other.to_string(),
    }
}

/// Why the broker ends a connection that it had accepted.
fn farewell(code: Farewell, said: &str) -> String {
    let words = match code {
        Farewell::SessionTakenOver => {
            "another client with the same id has taken over; give each client its own \
             `broker.client_id`"
        }
        Farewell::ServerShuttingDown => "the broker is shutting down",
        Farewell::KeepAliveTimeout => "the broker heard nothing from here in time",
        Farewell::NotAuthorized => {
            "the broker has withdrawn the right to connect; check its list of users"
        }
        other => {
            return format!("the broker ended the connection: {other:?} {said}")
                .trim_end()
                .to_owned();
        }
    };
    if said.is_empty() {
        words.to_owned()
    } else {
        format!("{words} ({said})")
    }
}

/// The message stays in the session of a client that cannot take it, and comes again for ever.
fn too_large(bytes: usize, limit: Option<u32>) -> String {
    let limit = limit.map_or_else(String::new, |limit| format!(", the limit is {limit}"));
    format!(
        "the broker delivers a message of {bytes} bytes, too large to be taken{limit}; find its \
         publisher, and remove it from the session of `broker.client_id` on the broker"
    )
}

fn refused_v5(code: &Code5) -> String {
    match code {
        Code5::BadUserNamePassword => wrong_password(),
        Code5::NotAuthorized | Code5::Banned => not_allowed(),
        Code5::BadClientId | Code5::ClientIdentifierNotValid => bad_client_id(),
        Code5::RefusedProtocolVersion | Code5::UnsupportedProtocolVersion => {
            "the broker does not speak MQTT 5; try `broker.protocol = 4`".to_owned()
        }
        other => format!("the broker refuses the connection: {other:?}"),
    }
}

fn refused_v4(code: Code4) -> String {
    match code {
        Code4::BadUserNamePassword => wrong_password(),
        Code4::NotAuthorized => not_allowed(),
        Code4::BadClientId => bad_client_id(),
        Code4::RefusedProtocolVersion => {
            "the broker does not speak MQTT 3.1.1; try `broker.protocol = 5`".to_owned()
        }
        Code4::ServiceUnavailable => "the broker says that it is unavailable".to_owned(),
        Code4::Success => "the broker accepted and then failed".to_owned(),
    }
}

fn wrong_password() -> String {
    "the broker refuses the user name or password; check `broker.user` and `broker.password_file`"
        .to_owned()
}

fn not_allowed() -> String {
    "the broker does not allow this client; check `broker.user`, `broker.password_file` and the broker's \
     own list of users"
        .to_owned()
}

fn bad_client_id() -> String {
    "the broker refuses the client id; change `broker.client_id`".to_owned()
}

fn closed() -> String {
    "the broker closed the connection; if this repeats, another client may have the same \
     `broker.client_id`, or the port may be the wrong one of `mqtt://` and `mqtts://`"
        .to_owned()
}

fn no_answer() -> String {
    "the broker does not answer; check `broker.url` and the network".to_owned()
}

fn network(error: &io::Error) -> String {
    match error.kind() {
        io::ErrorKind::ConnectionRefused => {
            "nothing listens at the broker's address; check `broker.url` and whether the broker runs"
                .to_owned()
        }
        io::ErrorKind::ConnectionAborted
        | io::ErrorKind::ConnectionReset
        | io::ErrorKind::BrokenPipe
        | io::ErrorKind::UnexpectedEof => closed(),
        io::ErrorKind::TimedOut => no_answer(),
        _ => match wrapped(error) {
            Some(e) => encryption(e),
            None => format!("the network says: {error}"),
        },
    }
}

/// The fault of TLS inside. The broker's word on our certificate comes only after the handshake
/// (RFC 8446 section 4.4.2.4), as an error of reading.
fn wrapped(error: &io::Error) -> Option<&rustls::Error> {
    let inner = error.get_ref()?;
    match inner.downcast_ref::<io::Error>() {
        Some(error) => wrapped(error),
        None => inner.downcast_ref(),
    }
}

fn tls(error: &TlsError) -> String {
    match error {
        TlsError::Io(e) => network(e),
        TlsError::TLS(e) => encryption(e),
        other => format!("the encrypted connection cannot be made: {other}"),
    }
}

fn encryption(error: &rustls::Error) -> String {
    use rustls::{CertificateError as C, Error as E};
    match error {
        E::InvalidCertificate(C::UnknownIssuer | C::BadSignature) => {
            "the broker's certificate is of an authority that is not trusted; check `broker.ca_file`"
                .to_owned()
        }
        E::InvalidCertificate(C::NotValidForName | C::NotValidForNameContext { .. }) => {
            "the broker's certificate is for another name than the host in `broker.url`".to_owned()
        }
        E::InvalidCertificate(C::Expired | C::ExpiredContext { .. }) => {
            "the broker's certificate has expired, or the clock here is wrong".to_owned()
        }
        E::InvalidCertificate(C::NotValidYet | C::NotValidYetContext { .. }) => {
            "the broker's certificate is not valid yet, or the clock here is wrong".to_owned()
        }
        E::InvalidMessage(_) => {
            "the broker does not speak TLS on this port; use its port for TLS, or `mqtt://`"
                .to_owned()
        }
        E::AlertReceived(AlertDescription::CertificateRequired) => {
            "the broker wants a client certificate; give `broker.client_certificate_file` and \
             `broker.client_key_file`"
                .to_owned()
        }
        E::AlertReceived(alert) => format!(
            "the broker refuses the encrypted connection ({alert:?}); check \
             `broker.client_certificate_file` and `broker.client_key_file`"
        ),
        other => format!("the encrypted connection cannot be made: {other}"),
    }
}
