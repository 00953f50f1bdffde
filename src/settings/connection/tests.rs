//! Checks of the connection options, the files they come from, and the wait between attempts.

use super::*;
use crate::settings::Protocol;

fn broker() -> Broker {
    Broker {
        host: "localhost".to_owned(),
        port: 1883,
        tls: false,
        client_id: "evenrow-quayside".to_owned(),
        protocol: Protocol::V5,
        user: Some("line".to_owned()),
        password_file: None,
        ca_file: None,
        client_certificate_file: None,
        client_key_file: None,
        session_expiry_s: 600,
        receive_maximum: 100,
        most_bytes: 65_536,
        keep_alive_s: 1,
    }
}

fn file(folder: &tempfile::TempDir, name: &str, text: &str) -> PathBuf {
    let path = folder.path().join(name);
    fs::write(&path, text).unwrap();
    path
}

fn failure(broker: &Broker) -> String {
    match Secrets::read(broker) {
        Ok(_) => String::new(),
        Err(e) => e.to_string(),
    }
}

#[test]
fn both_versions_get_the_same_address_credentials_and_limits() {
    let folder = tempfile::tempdir().unwrap();
    let broker = Broker {
        password_file: Some(file(&folder, "password", "open water\n")),
        ..broker()
    };
    let secrets = Secrets::read(&broker).unwrap();
    let v5 = options_v5(&broker, "a", &secrets);
    let v4 = options_v4(&broker, "a", &secrets);
    assert_eq!(v5.broker_address(), ("localhost".to_owned(), 1883));
    assert_eq!(v4.broker_address(), v5.broker_address());
    assert_eq!(v5.keep_alive(), Duration::from_secs(5));
    assert_eq!(v4.keep_alive(), v5.keep_alive());
    assert_eq!(v4.max_packet_size() as u32, v5.max_packet_size().unwrap());
    let login = v5.credentials().unwrap();
    assert_eq!(
        (login.username.as_str(), login.password.as_str()),
        ("line", "open water")
    );
    let login = v4.credentials().unwrap();
    assert_eq!(
        (login.username.as_str(), login.password.as_str()),
        ("line", "open water")
    );
}

#[test]
fn a_missing_or_wrong_file_is_named() {
    let folder = tempfile::tempdir().unwrap();
    let absent = folder.path().join("absent");
    let rubbish = file(&folder, "rubbish", "not a certificate");
    let no_password = Broker {
        password_file: Some(absent.clone()),
        ..broker()
    };
    assert!(failure(&no_password).starts_with("the password file "));
    assert!(failure(&no_password).contains("absent cannot be read"));
    let ca = |path: &PathBuf| Broker {
        tls: true,
        ca_file: Some(path.clone()),
        ..broker()
    };
    assert!(failure(&ca(&absent)).starts_with("the authorities' file "));
    assert!(failure(&ca(&rubbish)).ends_with("rubbish holds no certificate in PEM form"));
}

#[test]
fn a_private_authority_with_client_certificate_and_key_is_taken() {
    let folder = tempfile::tempdir().unwrap();
    let own = rcgen::generate_simple_self_signed(vec!["localhost".to_owned()]).unwrap();
    let certificate = file(&folder, "certificate", &own.cert.pem());
    let key = file(&folder, "key", &own.signing_key.serialize_pem());
    let broker = Broker {
        tls: true,
        ca_file: Some(certificate.clone()),
        client_certificate_file: Some(certificate.clone()),
        client_key_file: Some(key),
        ..broker()
    };
    let secrets = Secrets::read(&broker).unwrap();
    assert!(matches!(
        options_v5(&broker, "a", &secrets).transport(),
        Transport::Tls(_)
    ));
    let swapped = Broker {
        client_key_file: Some(certificate),
        ..broker
    };
    assert!(failure(&swapped).ends_with("certificate holds no private key in PEM form"));
}

#[test]
fn waits_double_up_to_the_limit_and_start_over_after_a_connection_that_stood() {
    let mut backoff = Backoff::default();
    for round in 0..40_u64 {
        let whole = Backoff::FIRST
            .saturating_mul(1 << round.min(16))
            .min(Backoff::LONGEST);
        let wait = backoff.wait_after(Duration::from_secs(round));
        let expected = if round > 30 { Backoff::FIRST } else { whole };
        assert!(
            wait >= expected / 2 && wait <= expected,
            "round {round}: {wait:?}"
        );
    }
}

#[test]
fn refusals_name_the_setting_to_look_at() {
    use rumqttc::v5::mqttbytes::v5::ConnectReturnCode;
    let refused = |code| trouble_v5(&rumqttc::v5::ConnectionError::ConnectionRefused(code));
    assert!(refused(ConnectReturnCode::BadUserNamePassword).contains("`broker.password_file`"));
    assert!(refused(ConnectReturnCode::NotAuthorized).contains("`broker.user`"));
    assert!(
        refused(ConnectReturnCode::UnsupportedProtocolVersion).contains("`broker.protocol = 4`")
    );
    let down = std::io::Error::from(std::io::ErrorKind::ConnectionRefused);
    assert!(trouble_v4(&rumqttc::ConnectionError::Io(down)).contains("`broker.url`"));
    let code = rumqttc::ConnectReturnCode::BadUserNamePassword;
    let v4 = trouble_v4(&rumqttc::ConnectionError::ConnectionRefused(code));
    assert_eq!(v4, refused(ConnectReturnCode::BadUserNamePassword));
}

#[test]
fn what_a_broker_says_at_the_end_is_told() {
    use rumqttc::v5::mqttbytes::v5::DisconnectReasonCode as Code;
    use rumqttc::v5::{ConnectionError, StateError};
    for (reason_code, words) in [
        (
            Code::SessionTakenOver,
            "its own `broker.client_id` (until noon)",
        ),
        (Code::ServerShuttingDown, "is shutting down (until noon)"),
        (Code::KeepAliveTimeout, "heard nothing from here"),
        (Code::NotAuthorized, "withdrawn the right"),
        (Code::QuotaExceeded, "QuotaExceeded until noon"),
    ] {
        let reason_string = Some("until noon".to_owned());
        let said = trouble_v5(&ConnectionError::MqttState(StateError::ServerDisconnect {
            reason_code,
            reason_string,
        }));
        assert!(said.contains(words), "{said}");
    }
}

#[test]
fn faults_on_the_way_are_told_whatever_wraps_them() {
    use rumqttc::v5::mqttbytes::Error as Bytes;
    use rumqttc::v5::{ConnectionError, StateError};
    use rustls::CertificateError as Why;
    use std::io;
    let certificate = |why| {
        let inner = io::Error::other(rustls::Error::InvalidCertificate(why));
        StateError::Io(io::Error::other(inner))
    };
    let alert = rustls::Error::AlertReceived(rustls::AlertDescription::CertificateRequired);
    let too_large = Bytes::PayloadSizeLimitExceeded {
        pkt_size: 20_000_000,
        max: 16_777_216,
    };
    for (state, words) in [
        (
            StateError::Deserialization(too_large),
            "20000000 bytes, too large to be taken, the limit is 16777216",
        ),
        (StateError::AwaitPingResp, "does not answer"),
        (
            StateError::ConnectionAborted,
            "another client may have the same",
        ),
        (
            StateError::Io(io::ErrorKind::ConnectionReset.into()),
            "closed the connection",
        ),
        (
            StateError::Io(io::Error::other("no route")),
            "the network says: no route",
        ),
        (
            StateError::Deserialization(Bytes::Io(io::Error::other(alert))),
            "wants a client certificate",
        ),
        (certificate(Why::Expired), "has expired"),
        (certificate(Why::NotValidYet), "not valid yet"),
        (certificate(Why::UnknownIssuer), "`broker.ca_file`"),
        (
            certificate(Why::NotValidForName),
            "another name than the host",
        ),
    ] {
        let said = trouble_v5(&ConnectionError::MqttState(state));
        assert!(said.contains(words), "{said}");
    }
}
