//! The listening connection against a real Mosquitto: sessions, redeliveries, restarts, refusals, TLS.

mod common;
#[path = "intake_mqtt/harness.rs"]
mod harness;

use std::time::Duration;

use common::certificates;
use common::mosquitto::Mosquitto;
use common::running::free_port;
use evenrow::engine::Condition;
use evenrow::intake::mqtt::{FromBroker, IntakeError};
use evenrow::model::Reason;
use evenrow::settings::{Broker, Protocol};
use harness::{BOTH, Intake, PATIENCE, broker};
use tokio::io::{AsyncReadExt, AsyncWriteExt};

#[tokio::test(flavor = "multi_thread")]
async fn what_was_not_acknowledged_comes_again_and_what_was_does_not() {
    for protocol in BOTH {
        let mosquitto = Mosquitto::start();
        let broker = broker(mosquitto.port(), protocol);
        let mut first = Intake::connected(&broker, Vec::new()).await;
        for (source, value) in [("01", "503.1"), ("02", "502.9"), ("03", "503.0")] {
            mosquitto.publish(&format!("line/{source}"), value.as_bytes(), &[]);
        }
        let acknowledged = first.measured("01", "503.1").await;
        let durable = first.measured("02", "502.9").await;
        first.measured("03", "503.0").await;
        assert_eq!(acknowledged.epoch, 1);
        first.durable(acknowledged).await;
        // Shutting down with the receipts open still acknowledges what is in them.
        first.end().await;

        // 02 was durable before the end, 03 was not.
        let mut second = Intake::connected(&broker, vec![durable.pair().unwrap()]).await;
        let again = second.refused(Reason::Redelivered).await;
        second.durable(again).await;
        let receipt = second.measured("03", "503.0").await;
        second.durable(receipt).await;
        // While nobody listened, the broker kept what was published.
        second.nothing_comes().await;
        second.end().await;
        mosquitto.publish("line/04", b"1", &[]);

        let mut third = Intake::connected(&broker, Vec::new()).await;
        let receipt = third.measured("04", "1").await;
        third.durable(receipt).await;
        third.nothing_comes().await;
        third.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_restarted_broker_is_found_again_and_nothing_is_doubled() {
    for protocol in BOTH {
        let mut mosquitto = Mosquitto::start();
        let broker = broker(mosquitto.port(), protocol);
        let mut intake = Intake::connected(&broker, Vec::new()).await;
        for (source, value) in [("01", "1"), ("02", "2")] {
            mosquitto.publish(&format!("line/{source}"), value.as_bytes(), &[]);
        }
        let under_way = intake.measured("01", "1").await;
        let durable = intake.measured("02", "2").await;
        mosquitto.go_away();
        intake
            .trouble(&format!("127.0.0.1:{}", mosquitto.port()))
            .await;
        // Became durable while there was nobody to acknowledge it to.
        intake.durable(durable).await;
        mosquitto.come_back();
        let mut conditions = Vec::new();
        let again = loop {
            match intake.next().await {
                FromBroker::Condition(condition) => conditions.push(condition),
                FromBroker::Arrival(arrival) => break arrival,
            }
        };
        // 01 is still under way and is not handed on a second time; 02 is refused.
        let reasons: Vec<_> = again.refusals.iter().map(|r| r.reason).collect();
        assert_eq!(reasons, [Reason::Redelivered], "{again:?}");
        intake.durable(again.receipt).await;
        intake.durable(under_way).await;
        if conditions.last() != Some(&Condition::Well) {
            assert_eq!(intake.condition().await, Condition::Well);
        }
        mosquitto.publish("line/03", b"3", &[]);
        let receipt = intake.measured("03", "3").await;
        assert!(receipt.epoch > 1);
        intake.durable(receipt).await;
        intake.nothing_comes().await;
        intake.end().await;
        let mut last = Intake::connected(&broker, Vec::new()).await;
        last.nothing_comes().await;
        last.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn retained_messages_are_no_measurements() {
    for protocol in BOTH {
        let mosquitto = Mosquitto::start();
        mosquitto.publish("line/01", b"1", &["-r"]);
        let broker = broker(mosquitto.port(), protocol);
        let mut intake = Intake::connected(&broker, Vec::new()).await;
        if protocol == Protocol::V4 {
            let receipt = intake.refused(Reason::Retained).await;
            intake.durable(receipt).await;
        }
        // Published with the flag, but fresh: it is taken.
        mosquitto.publish("line/01", b"2", &["-r"]);
        let receipt = intake.measured("01", "2").await;
        intake.durable(receipt).await;
        intake.nothing_comes().await;
        intake.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn bad_input_is_refused_and_the_listening_goes_on() {
    for protocol in BOTH {
        let mosquitto = Mosquitto::start();
        let rubbish = vec![0xfe; 1 << 20];
        let broker = broker(mosquitto.port(), protocol);
        let mut intake = Intake::connected(&broker, Vec::new()).await;
        for (payload, reason) in [
            (&rubbish[..], Reason::TooLarge),
            (b"", Reason::Empty),
            (b"NaN", Reason::NotFinite),
            (b"1,5", Reason::NotANumber),
        ] {
            for qos in ["0", "1"] {
                mosquitto.publish("line/01", payload, &["-q", qos]);
                let receipt = intake.refused(reason).await;
                assert_eq!(receipt.packet.is_some(), qos == "1");
                intake.durable(receipt).await;
            }
        }
        mosquitto.publish("line/01", b"1.5", &[]);
        intake.measured("01", "1.5").await;
        intake.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_wrong_password_is_said_and_a_right_one_found_later() {
    for protocol in BOTH {
        let settings = "allow_anonymous false\npassword_file {folder}/passwords\n";
        let mosquitto = Mosquitto::start_with(settings, |folder| {
            let made = std::process::Command::new("mosquitto_passwd")
                .args(["-c", "-b"])
                .arg(folder.join("passwords"))
                .args(["evenrow", "right"])
                .status();
            assert!(
                made.is_ok_and(|status| status.success()),
                "mosquitto_passwd"
            );
        });
        let password = mosquitto.path("password");
        let with = |user: Option<&str>| Broker {
            user: user.map(str::to_owned),
            password_file: user.map(|_| password.clone()),
            ..broker(mosquitto.port(), protocol)
        };
        let mut nobody = Intake::start(with(None), Vec::new(), 16);
        nobody.trouble("check `broker.user`").await;
        nobody.end().await;
        let mut intake = Intake::start(with(Some("evenrow")), Vec::new(), 16);
        intake.trouble("the password file").await;
        std::fs::write(&password, "wrong\n").unwrap();
        intake.trouble("`broker.password_file`").await;
        std::fs::write(&password, "right\n").unwrap();
        assert_eq!(intake.condition().await, Condition::Well);
        intake.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_broker_that_is_not_there_is_said() {
    for protocol in BOTH {
        let port = free_port();
        let mut intake = Intake::start(broker(port, protocol), Vec::new(), 16);
        intake
            .trouble(&format!("nothing listens at the broker's address; check `broker.url` and whether the broker runs (127.0.0.1:{port})"))
            .await;
        intake.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn a_second_client_of_the_same_name_is_said() {
    let mosquitto = Mosquitto::start();
    let broker = broker(mosquitto.port(), Protocol::V5);
    let mut first = Intake::connected(&broker, Vec::new()).await;
    let second = Intake::connected(&broker, Vec::new()).await;
    first
        .trouble("another client may have the same `broker.client_id`")
        .await;
    first.end().await;
    second.end().await;
}

#[tokio::test(flavor = "multi_thread")]
async fn a_private_authority_and_client_certificates() {
    for protocol in BOTH {
        let settings = "allow_anonymous true\nrequire_certificate true\ncafile {folder}/ca.pem\n\
                        certfile {folder}/broker.pem\nkeyfile {folder}/broker.key\n";
        let mut mosquitto = Mosquitto::start_with(settings, certificates::write);
        let other = tempfile::tempdir().unwrap();
        certificates::write(other.path());
        let good = Broker {
            host: "localhost".into(),
            tls: true,
            ca_file: Some(mosquitto.path("ca.pem")),
            client_certificate_file: Some(mosquitto.path("client.pem")),
            client_key_file: Some(mosquitto.path("client.key")),
            ..broker(mosquitto.port(), protocol)
        };
        let mut intake = Intake::connected(&good, Vec::new()).await;
        let file = |name: &str| mosquitto.path(name).display().to_string();
        let (ca, own, key) = (file("ca.pem"), file("client.pem"), file("client.key"));
        mosquitto.clients_say(&["--cafile", &ca, "--cert", &own, "--key", &key, "--insecure"]);
        mosquitto.publish("line/01", b"503.1", &[]);
        let receipt = intake.measured("01", "503.1").await;
        intake.durable(receipt).await;
        intake.end().await;

        let stranger = |name: &str| Some(other.path().join(name));
        for (wrong, words) in [
            (
                Broker {
                    ca_file: stranger("ca.pem"),
                    ..good.clone()
                },
                "an authority that is not trusted",
            ),
            (
                Broker {
                    host: "127.0.0.1".into(),
                    ..good.clone()
                },
                "another name than the host",
            ),
            (
                Broker {
                    client_certificate_file: None,
                    client_key_file: None,
                    ..good.clone()
                },
                "wants a client certificate",
            ),
            (
                Broker {
                    client_certificate_file: stranger("client.pem"),
                    client_key_file: stranger("client.key"),
                    ..good.clone()
                },
                "refuses the encrypted connection",
            ),
            (
                Broker {
                    client_key_file: None,
                    ..good.clone()
                },
                "wants a client certificate",
            ),
            (
                Broker {
                    client_key_file: stranger("client.key"),
                    ..good.clone()
                },
                "cannot be used",
            ),
            (
                Broker {
                    ca_file: stranger("client.key"),
                    ..good.clone()
                },
                "holds no certificate in PEM form",
            ),
            (
                Broker {
                    ca_file: stranger("missing.pem"),
                    ..good.clone()
                },
                "missing.pem cannot be read",
            ),
            (
                Broker {
                    tls: false,
                    ..good.clone()
                },
                "the wrong one of `mqtt://` and `mqtts://`",
            ),
        ] {
            let mut intake = Intake::start(wrong, Vec::new(), 16);
            intake.trouble(words).await;
            intake.end().await;
        }
    }
    let plain = Mosquitto::start();
    let wrong = Broker {
        tls: true,
        ..broker(plain.port(), Protocol::V5)
    };
    let mut intake = Intake::start(wrong, Vec::new(), 16);
    intake
        .trouble("the wrong one of `mqtt://` and `mqtts://`")
        .await;
    intake.end().await;
}

/// What the stock broker never says, from one that follows a script: it takes the connection, refuses
/// the first of the subscriptions, and ends the connection because another client came.
#[tokio::test(flavor = "multi_thread")]
async fn a_refused_subscription_and_a_session_taken_over_are_said() {
    let listener = tokio::net::TcpListener::bind("127.0.0.1:0").await.unwrap();
    let port = listener.local_addr().unwrap().port();
    let script = tokio::spawn(async move {
        let (mut socket, _) = listener.accept().await.unwrap();
        let mut heard = [0; 1024];
        // Packets of MQTT 5.0, sections 3.2, 3.9 and 3.14.
        for said in [
            &[0x20, 3, 0, 0, 0][..],
            &[0x90, 4, 0, 1, 0, 0x87],
            &[0xe0, 2, 0x8e, 0],
        ] {
            assert!(socket.read(&mut heard).await.unwrap() > 0);
            socket.write_all(said).await.unwrap();
        }
        // Kept open until the client has read it.
        socket.read(&mut heard).await.unwrap()
    });
    let mut intake = Intake::start(broker(port, Protocol::V5), Vec::new(), 16);
    intake
        .trouble("the broker refuses to deliver line/+ (not allowed)")
        .await;
    intake
        .trouble("another client with the same id has taken over")
        .await;
    intake.end().await;
    assert_eq!(script.await.unwrap(), 0);
}

/// QoS 0 cannot wait at the broker: what finds no room is refused and counted.
#[tokio::test(flavor = "multi_thread")]
async fn what_comes_faster_than_it_is_kept_is_counted() {
    for protocol in BOTH {
        let mosquitto = Mosquitto::start();
        let broker = broker(mosquitto.port(), protocol);
        let mut intake = Intake::start(broker, Vec::new(), 1);
        assert_eq!(intake.condition().await, Condition::Well);
        let lines: Vec<String> = (0..1500).map(|n: u32| n.to_string()).collect();
        let mut command = std::process::Command::new("mosquitto_pub");
        command.args(["-h", "127.0.0.1", "-p", &mosquitto.port().to_string()]);
        command.args(["-t", "line/01", "-q", "0", "-l"]);
        let mut child = command.stdin(std::process::Stdio::piped()).spawn().unwrap();
        let text = format!("{}\n", lines.join("\n"));
        std::io::Write::write_all(&mut child.stdin.take().unwrap(), text.as_bytes()).unwrap();
        assert!(child.wait().unwrap().success());
        mosquitto.publish("line/01", b"last", &[]);
        tokio::time::sleep(Duration::from_secs(2)).await;
        let (mut measured, mut refused) = (0, 0);
        while measured + refused < 1501 {
            let arrival = intake.arrival().await;
            measured += arrival.measurements.len();
            refused += arrival.refusals.len();
            for refusal in arrival.refusals {
                let last = refusal.reason == Reason::NotANumber && refusal.excerpt == "last";
                assert!(last || refusal.reason == Reason::Overflow, "{refusal:?}");
            }
        }
        assert!(measured >= 1000 && refused > 1, "{measured} {refused}");
        intake.nothing_comes().await;
        intake.end().await;
    }
}

/// While the engine takes nothing, keep-alive goes on, QoS 1 waits at the broker and nothing is lost.
#[tokio::test(flavor = "multi_thread")]
async fn a_standing_engine_breaks_no_connection() {
    let mosquitto = Mosquitto::start();
    let mut handles = Vec::new();
    for protocol in BOTH {
        let broker = Broker {
            client_id: format!("evenrow-{protocol:?}"),
            receive_maximum: 10,
            ..broker(mosquitto.port(), protocol)
        };
        let mut intake = Intake::start(broker, Vec::new(), 1);
        assert_eq!(intake.condition().await, Condition::Well);
        handles.push(intake);
    }
    let lines: Vec<String> = (0..200).map(|n: u8| n.to_string()).collect();
    mosquitto.publish_lines("line/01", &lines);
    // Mosquitto ends a connection after one and a half keep-alives, here 7.5 s.
    tokio::time::sleep(Duration::from_secs(10)).await;
    for mut intake in handles {
        for n in 0..200 {
            let receipt = intake.measured("01", &n.to_string()).await;
            assert_eq!(receipt.epoch, 1);
            intake.durable(receipt).await;
        }
        intake.nothing_comes().await;
        intake.end().await;
    }
}

#[tokio::test(flavor = "multi_thread")]
async fn intake_ends_when_nobody_takes() {
    let mosquitto = Mosquitto::start();
    let broker = broker(mosquitto.port(), Protocol::V5);
    let intake = Intake::connected(&broker, Vec::new()).await;
    drop(intake.feed);
    let ended = tokio::time::timeout(PATIENCE, intake.task).await;
    let error = ended.expect("in time").expect("no panic").unwrap_err();
    assert!(matches!(error, IntakeError::NobodyTakes));
}
