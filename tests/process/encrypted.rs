//! TLS with a private authority and client certificates, in both versions of the protocol.

use crate::common::certificates;
use crate::common::mosquitto::Mosquitto;
use crate::daemon::{Plant, Wanted};
use crate::line::{Line, Off};

fn encrypted_broker() -> Mosquitto {
    let settings = "allow_anonymous true\ncafile {folder}/ca.pem\ncertfile {folder}/broker.pem\n\
                    keyfile {folder}/broker.key\nrequire_certificate true\n";
    let mut broker = Mosquitto::start_with(settings, certificates::write);
    let at = |name: &str| broker.path(name).display().to_string();
    let (ca, certificate, key) = (at("ca.pem"), at("client.pem"), at("client.key"));
    broker.clients_say(&[
        "--cafile",
        &ca,
        "--cert",
        &certificate,
        "--key",
        &key,
        "--insecure",
    ]);
    broker
}

/// One drifting head over an encrypted connection, up to the notice on the broker.
#[track_caller]
fn a_notice_arrives(protocol: u8) {
    let broker = encrypted_broker();
    let heard = broker.listen("evenrow/#");
    let at = |name: &str| broker.path(name).display().to_string();
    let wanted = Wanted {
        broker: format!(
            "protocol = {protocol}\nca_file = \"{}\"\nclient_certificate_file = \"{}\"\n\
             client_key_file = \"{}\"",
            at("ca.pem"),
            at("client.pem"),
            at("client.key")
        ),
        url: Some(format!("mqtts://localhost:{}", broker.port())),
        ..Wanted::default()
    };
    let plant = Plant::new(broker.port(), &wanted);
    let daemon = plant.start_ready();
    let mut line = Line::new();
    line.publish(&broker, 100, &[Off { head: 3, by: 3.0 }]);
    let notice = heard.wait("a notice", |s| s.topic.contains("/notices/"));
    assert!(notice.payload.contains("\"03\""), "{}", notice.payload);
    daemon.end(&[]);
}

#[test]
fn protocol_5_with_a_private_authority_and_client_certificates() {
    a_notice_arrives(5);
}

#[test]
fn protocol_3_1_1_with_a_private_authority_and_client_certificates() {
    a_notice_arrives(4);
}
