//! Why a connection failed, in words an operator can act on. The client's own errors name its
//! internals; these name the setting to look at.

use std::io;

use rumqttc::v5::mqttbytes::v5::ConnectReturnCode as Code5;
use rumqttc::{ConnectReturnCode as Code4, TlsError};

/// A failed connection with MQTT 5, in words.
pub fn trouble_v5(error: &rumqttc::v5::ConnectionError) -> String {
    use rumqttc::v5::{ConnectionError as E, StateError as S};
    match error {
        E::ConnectionRefused(code) => refused_v5(code),
        E::MqttState(S::ConnFail { reason }) => refused_v5(reason),
        E::MqttState(S::Io(e)) | E::Io(e) => network(e),
        E::MqttState(S::ConnectionAborted) => closed(),
        E::MqttState(S::AwaitPingResp) => no_answer(),
        E::MqttState(S::ServerDisconnect {
            reason_code,
            reason_string,
        }) => {
            let said = reason_string.as_deref().unwrap_or_default();
            format!("the broker ended the connection: {reason_code:?} {said}")
                .trim_end()
                .to_owned()
        }
        E::Timeout(_) => no_answer(),
        E::Tls(e) => tls(e),
        other => other.to_string(),
    }
}

/// A failed connection with MQTT 3.1.1, in words.
pub fn trouble_v4(error: &rumqttc::ConnectionError) -> String {
    use rumqttc::{ConnectionError as E, StateError as S};
    match error {
        E::ConnectionRefused(code) => refused_v4(*code),
        E::MqttState(S::Io(e)) | E::Io(e) => network(e),
        E::MqttState(S::ConnectionAborted) => closed(),
        E::MqttState(S::AwaitPingResp) | E::NetworkTimeout | E::FlushTimeout => no_answer(),
        E::Tls(e) => tls(e),
        other => other.to_string(),
    }
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
    "the broker closed the connection".to_owned()
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
        _ => match error.get_ref().and_then(|e| e.downcast_ref::<rustls::Error>()) {
            Some(e) => encryption(e),
            None => format!("the network says: {error}"),
        },
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
        E::InvalidCertificate(C::UnknownIssuer) => {
            "the broker's certificate is of an authority that is not trusted; check `broker.ca_file`"
                .to_owned()
        }
        E::InvalidCertificate(C::NotValidForName | C::NotValidForNameContext { .. }) => {
            "the broker's certificate is for another name than the host in `broker.url`".to_owned()
        }
        E::InvalidCertificate(C::Expired | C::ExpiredContext { .. }) => {
            "the broker's certificate has expired".to_owned()
        }
        E::AlertReceived(alert) => format!(
            "the broker refuses the encrypted connection ({alert:?}); check \
             `broker.client_certificate_file` and `broker.client_key_file`"
        ),
        other => format!("the encrypted connection cannot be made: {other}"),
    }
}
