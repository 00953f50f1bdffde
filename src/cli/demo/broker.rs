//! The broker inside the process, on a free port of the loopback address.
//!
//! For the demo only: it keeps everything in memory and its threads end with the process. Plants
//! bring their own broker. Deliberately absent: credentials and encryption; nothing but this process
//! is meant to use it.

use std::collections::HashMap;
use std::io;
use std::net::{Ipv4Addr, SocketAddr, TcpListener};
use std::thread;
use std::time::Duration;

use rumqttd::{Broker, Config, ConnectionSettings, RouterConfig, ServerSettings};
use tokio::net::TcpStream;
use tokio::time::{sleep, timeout};

/// Connections the demo needs: listening, speaking, the line, the bulletin; the rest is room for a
/// curious person's client.
const MOST_CONNECTIONS: usize = 64;
/// A log of one topic filter holds ten of these; the whole backlog is about 4 MB.
const SEGMENT_BYTES: usize = 10 << 20;
/// How long the broker may take to answer; it is up within milliseconds.
const UP_WITHIN: Duration = Duration::from_secs(5);
/// Another program may take the port between our looking and the broker's binding.
const ATTEMPTS: usize = 5;

/// Why the broker did not start.
#[derive(Debug, thiserror::Error)]
pub enum BrokerError {
    /// No port, no thread.
    #[error("the demo's broker could not start: {0}")]
    Start(#[from] io::Error),
    /// It never answered.
    #[error("the demo's broker did not answer on a loopback port; is one blocked?")]
    Silent,
}

/// Starts the broker; it runs until the process ends.
///
/// # Errors
/// When it cannot start, or does not answer.
pub async fn start() -> Result<SocketAddr, BrokerError> {
    for _ in 0..ATTEMPTS {
        // rumqttd takes an address, no socket: find a free port, let go of it, give it on.
        let address = TcpListener::bind((Ipv4Addr::LOCALHOST, 0))?.local_addr()?;
        let mut broker = Broker::new(config(address));
        let work = move || {
            // Its end is seen by the clients, which say so; there is nothing to add here.
            let _ = broker.start();
        };
        let server = thread::Builder::new()
            .name("demo-broker".to_owned())
            .spawn(work)?;
        if let Ok(true) = timeout(UP_WITHIN, answers(address, &server)).await {
            return Ok(address);
        }
    }
    Err(BrokerError::Silent)
}

/// Waits until the broker answers; false when its thread has ended instead.
async fn answers<T>(address: SocketAddr, server: &thread::JoinHandle<T>) -> bool {
    while TcpStream::connect(address).await.is_err() {
        if server.is_finished() {
            return false;
        }
        sleep(Duration::from_millis(20)).await;
    }
    !server.is_finished()
}

/// One listener for MQTT 3.1.1.
fn config(listen: SocketAddr) -> Config {
    let connections = ConnectionSettings {
        connection_timeout_ms: 5_000,
        max_payload_size: 1 << 20,
        max_inflight_count: 100,
        auth: None,
        external_auth: None,
        dynamic_filters: true,
    };
    let server = ServerSettings {
        name: "demo".to_owned(),
        listen,
        tls: None,
        next_connection_delay_ms: 1,
        connections,
    };
    Config {
        router: RouterConfig {
            max_connections: MOST_CONNECTIONS,
            max_outgoing_packet_count: 200,
            max_segment_size: SEGMENT_BYTES,
            max_segment_count: 10,
            ..RouterConfig::default()
        },
        v4: Some(HashMap::from([("demo".to_owned(), server)])),
        ..Config::default()
    }
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use rumqttc::{AsyncClient, Event, EventLoop, Packet, QoS};
    use tokio::sync::watch;
    use tokio_util::sync::CancellationToken;

    use super::super::filler::{Filler, HEADS};
    use super::super::line::{self, Schedule};
    use super::*;
    use crate::clock::Clock;

    /// Topics and payloads of the next `wanted` messages.
    async fn hear(
        client: AsyncClient,
        mut events: EventLoop,
        wanted: usize,
    ) -> Vec<(String, String)> {
        let mut heard = Vec::new();
        while heard.len() < wanted {
            match events.poll().await.expect("a connection") {
                Event::Incoming(Packet::ConnAck(_)) => {
                    let filter = "quayside/filler2/head/+/net";
                    client
                        .try_subscribe(filter, QoS::AtLeastOnce)
                        .expect("room");
                }
                Event::Incoming(Packet::Publish(message)) => {
                    let text = String::from_utf8_lossy(&message.payload).into_owned();
                    heard.push((message.topic, text));
                }
                _ => {}
            }
        }
        heard
    }

    #[tokio::test]
    async fn what_the_line_publishes_arrives_through_the_broker_in_order() {
        let address = start().await.expect("a broker");
        let (client, events) = line::connect("listener", address);
        let cycles = 50_usize;
        let listener = tokio::spawn(hear(client, events, cycles * HEADS));
        // The line starts only when the subscription stands; nobody tells us, so give it time.
        sleep(Duration::from_millis(300)).await;

        let clock = Clock::System;
        let schedule = Schedule::running_for(cycles as u64, 50_000, clock.now());
        let filler = Filler::new(1);
        let (_keep, seen) = watch::channel(Arc::new(filler.clone()));
        let (client, mut events) = line::connect("line", address);
        tokio::spawn(async move { while events.poll().await.is_ok() {} });
        let shutdown = CancellationToken::new();
        let line = tokio::spawn(line::run(client, schedule, seen, clock, shutdown.clone()));

        let heard = timeout(Duration::from_secs(20), listener).await;
        let heard = heard.expect("in time").expect("no panic");
        shutdown.cancel();
        line.await.expect("no panic").expect("a clean end");
        for (cycle, messages) in heard.chunks(HEADS).enumerate() {
            let weights = filler.weigh(cycle as u64);
            for (head, (topic, text)) in messages.iter().enumerate() {
                let wanted = format!("quayside/filler2/head/{:02}/net", head + 1);
                assert_eq!(*topic, wanted);
                let start = format!(r#"{{"v":{},"#, weights[head]);
                assert!(text.starts_with(&start), "{text} in cycle {cycle}");
            }
        }
    }
}
