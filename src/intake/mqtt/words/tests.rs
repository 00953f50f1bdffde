//! Every fault a person can put right has its own words. The faults of TLS and of a broker that is
//! away are provoked against a real broker in `tests/intake_mqtt.rs`; here are those it will not give.

use super::*;
use crate::settings::Protocol;
use rumqttc::v5::{ConnectionError, StateError};

fn broker() -> Broker {
    Broker {
        host: "broker.quayside.test".into(),
        port: 1883,
        tls: false,
        client_id: "evenrow-quayside".into(),
        protocol: Protocol::V5,
        user: Some("evenrow".into()),
        password_file: None,
        ca_file: None,
        client_certificate_file: None,
        client_key_file: None,
        session_expiry_s: 60,
        receive_maximum: 8,
        most_bytes: 4096,
        keep_alive_s: 5,
    }
}

fn said(error: ConnectionError) -> String {
    lost_v5(&error, &broker(), Place::Inside)
}

#[test]
fn refusals_at_the_door() {
    use five::ConnectReturnCode as Code;
    for (code, words) in [
        (Code::BadUserNamePassword, "refuses user name or password"),
        (Code::NotAuthorized, "does not let 'evenrow' in"),
        (Code::ClientIdentifierNotValid, "check broker.client_id"),
        (Code::UnsupportedProtocolVersion, "set broker.protocol"),
        (Code::ServerBusy, "takes no further connection"),
        (Code::ServerMoved, "refuses the connection: ServerMoved"),
    ] {
        let got = said(ConnectionError::ConnectionRefused(code));
        assert!(got.contains(words), "{got}");
        assert!(got.contains("broker.quayside.test:1883"), "{got}");
    }
}

#[test]
fn farewells_of_the_broker() {
    use five::DisconnectReasonCode as Code;
    for (reason_code, words) in [
        (
            Code::SessionTakenOver,
            "another client has taken over the session of client id 'evenrow-quayside'",
        ),
        (Code::ServerShuttingDown, "is shutting down (until noon)"),
        (Code::KeepAliveTimeout, "heard nothing from here"),
        (Code::NotAuthorized, "withdrawn the right"),
        (Code::QuotaExceeded, "QuotaExceeded"),
    ] {
        let reason_string = Some("until noon".to_owned());
        let state = StateError::ServerDisconnect {
            reason_code,
            reason_string,
        };
        let got = said(ConnectionError::MqttState(state));
        assert!(got.contains(words), "{got}");
    }
}

#[test]
fn faults_on_the_way() {
    let oversized = v5::mqttbytes::Error::PayloadSizeLimitExceeded {
        pkt_size: 20_000_000,
        max: 16_777_216,
    };
    for (state, words) in [
        (
            StateError::Deserialization(oversized),
            "a message of 20000000 bytes, more than the 16777216",
        ),
        (StateError::AwaitPingResp, "has stopped answering"),
        (
            StateError::ConnectionAborted,
            "another client may use the client id",
        ),
        (
            StateError::Io(io::ErrorKind::ConnectionReset.into()),
            "closed the connection",
        ),
        (
            StateError::Io(io::Error::other("no route")),
            "cannot be reached: no route",
        ),
        (StateError::InvalidState, "is lost: "),
    ] {
        let got = said(ConnectionError::MqttState(state));
        assert!(got.contains(words), "{got}");
    }
}

#[test]
fn faults_of_certificates() {
    use rustls::CertificateError as Why;
    for (why, words) in [
        (Why::Expired, "has expired"),
        (Why::NotValidYet, "not valid yet"),
        (Why::UnknownIssuer, "the system's authorities"),
        (
            Why::NotValidForName,
            "not made out to 'broker.quayside.test'",
        ),
        (Why::Revoked, "is refused"),
    ] {
        let error = io::Error::other(rustls::Error::InvalidCertificate(why));
        let got = said(ConnectionError::Io(io::Error::other(error)));
        assert!(got.contains(words), "{got}");
    }
}
