//! The connection that listens to Sparkplug's edge nodes: a session that begins anew each time, QoS 0,
//! a client id of its own (§5.4 of the specification asks hosts for a clean session).
//!
//! What must hold: as for the other connection, polling never waits for the engine. What finds no
//! room is refused as overflow, because QoS 0 cannot wait.

use std::future::Future;
use std::pin::{Pin, pin};
use std::sync::Arc;
use std::time::Duration;

use tokio::sync::mpsc;
use tokio_util::sync::CancellationToken;

use crate::clock::{Clock, Stopwatch};
use crate::engine::Condition;
use crate::intake::nodes::{Nodes, Outcome};
use crate::intake::payload::Fault;
use crate::model::Reason;
use crate::settings::Settings;
use crate::settings::connection::{Backoff, Secrets};

use super::link::{Heard, Link, Message, Role, Speaker};
use super::queue::Queue;
use super::{FromBroker, IntakeError};

/// What is appended to the client id.
const CLIENT: &str = "-sparkplug";
/// How long the farewell may take.
const DRAIN: Duration = Duration::from_secs(1);

/// Everything the task owns.
pub(super) struct Edge {
    settings: Arc<Settings>,
    clock: Clock,
    /// Where the broker is, for people.
    place: String,
    nodes: Nodes,
    queue: Queue,
    said: Condition,
    feed: mpsc::Sender<FromBroker>,
    shutdown: CancellationToken,
}

/// How a connection ended.
enum End {
    Shutdown,
    NobodyTakes,
    /// What is wrong, in words.
    Lost(String),
}

impl Edge {
    pub(super) fn new(
        settings: Arc<Settings>,
        nodes: Nodes,
        feed: mpsc::Sender<FromBroker>,
        shutdown: CancellationToken,
    ) -> Self {
        Self {
            place: format!("{}:{}", settings.broker.host, settings.broker.port),
            queue: Queue::new(settings.broker.receive_maximum),
            settings,
            clock: Clock::System,
            nodes,
            said: Condition::Starting,
            feed,
            shutdown,
        }
    }

    pub(super) async fn run(mut self) -> Result<(), IntakeError> {
        let mut backoff = Backoff::default();
        loop {
            let since = Stopwatch::start();
            match self.connection().await {
                End::Shutdown => return Ok(()),
                End::NobodyTakes => return Err(IntakeError::NobodyTakes),
                End::Lost(why) => {
                    let place = &self.place;
                    let words = format!("{why} ({place}, the connection for Sparkplug)");
                    self.say(Condition::Trouble(words));
                }
            }
            let wait = backoff.wait_after(since.elapsed());
            match self.until(pin!(tokio::time::sleep(wait)), None).await {
                Ok(()) => {}
                Err(End::NobodyTakes) => return Err(IntakeError::NobodyTakes),
                Err(End::Shutdown | End::Lost(_)) => return Ok(()),
            }
        }
    }

    /// One connection from its making to its end.
    async fn connection(&mut self) -> End {
        let settings = self.settings.clone();
        let read = tokio::task::spawn_blocking(move || Secrets::read(&settings.broker));
        let secrets = match self.until(pin!(read), None).await {
            Ok(Ok(Ok(secrets))) => secrets,
            Ok(Ok(Err(error))) => return End::Lost(error.to_string()),
            Ok(Err(error)) => return End::Lost(error.to_string()),
            Err(end) => return end,
        };
        let (mut link, speaker) = Link::new(&self.settings.broker, &secrets, Role::Aside(CLIENT));
        let end = loop {
            let heard = match self.until(pin!(link.next()), Some(&speaker)).await {
                Ok(Ok(heard)) => heard,
                Ok(Err(why)) => break End::Lost(why),
                Err(end) => break end,
            };
            match heard {
                Heard::Connected { .. } => {
                    self.nodes.connected();
                    if speaker.subscribe_aside(self.nodes.filters()).is_err() {
                        break End::Lost("the topics cannot be subscribed".to_owned());
                    }
                }
                Heard::Subscribed(faults) => self.subscribed(&faults),
                Heard::Message(message) => self.message(&message, &speaker),
                Heard::Disconnected | Heard::Nothing => {}
            }
        };
        if matches!(end, End::Shutdown) && speaker.disconnect().is_ok() {
            let gone =
                async { while !matches!(link.next().await, Ok(Heard::Disconnected) | Err(_)) {} };
            if tokio::time::timeout(DRAIN, gone).await.is_err() {
                tracing::debug!("the broker did not take the farewell in time");
            }
        }
        end
    }

    /// Waits for `future`; meanwhile the engine is served and the nodes are told the time.
    async fn until<F: Future>(
        &mut self,
        mut future: Pin<&mut F>,
        speaker: Option<&Speaker>,
    ) -> Result<F::Output, End> {
        // Its own, so that waiting for room does not hold the rest.
        let feed = self.feed.clone();
        loop {
            let deadline = self.nodes.deadline();
            let wait = deadline.map_or(DRAIN, |at| at.wait_from(self.clock.now()));
            tokio::select! {
                out = &mut future => return Ok(out),
                () = self.shutdown.cancelled() => return Err(End::Shutdown),
                room = feed.reserve(), if !self.queue.is_empty() => match room {
                    Ok(permit) => if let Some(next) = self.queue.pop() {
                        permit.send(next);
                    },
                    Err(_) => return Err(End::NobodyTakes),
                },
                () = tokio::time::sleep(wait), if deadline.is_some() => {
                    let outcome = self.nodes.tick(self.clock.now());
                    self.enter(outcome, speaker);
                }
                () = feed.closed() => return Err(End::NobodyTakes),
            }
        }
    }

    fn subscribed(&mut self, faults: &[Option<&'static str>]) {
        let filters = self.nodes.filters().iter();
        let refused: Vec<String> = filters
            .zip(faults)
            .filter_map(|(filter, fault)| fault.map(|why| format!("{filter} ({why})")))
            .collect();
        if refused.is_empty() {
            self.say(Condition::Well);
        } else {
            let list = refused.join(", ");
            let words = format!("the broker refuses to deliver {list}; check its access list");
            self.say(Condition::Trouble(words));
        }
    }

    fn message(&mut self, message: &Message, speaker: &Speaker) {
        let now = self.clock.now();
        let Message {
            topic,
            payload,
            retain,
            ..
        } = message;
        let outcome = if *retain {
            let detail =
                "the message was retained by the broker, and births, data and deaths never are";
            self.nodes
                .refused(topic, Fault::new(Reason::Retained, detail))
        } else {
            self.nodes.take(topic, payload, now)
        };
        self.enter(outcome, Some(speaker));
    }

    fn enter(&mut self, outcome: Outcome, speaker: Option<&Speaker>) {
        let Outcome {
            arrival,
            publish,
            gone,
        } = outcome;
        for who in gone {
            tracing::info!("{who} is gone; nothing of it is believed until its next birth");
        }
        for (topic, payload) in publish {
            tracing::info!(
                topic,
                "a message of an edge node is missing, asking for its birth"
            );
            // Without room for it now, it is asked again with the next message that cannot be read.
            let _ = speaker.map(|speaker| speaker.publish(&topic, payload));
        }
        if arrival.measurements.is_empty() && arrival.refusals.is_empty() {
            return;
        }
        if self.queue.has_share() {
            self.queue.push(arrival);
            return;
        }
        let detail = "it came with QoS 0 faster than measurements can be kept";
        let topic: crate::model::Name = CLIENT.trim_start_matches('-').into();
        let lost = arrival
            .measurements
            .iter()
            .map(|lost| crate::model::Refusal {
                bank: Some(lost.bank),
                reason: Reason::Overflow,
                topic: topic.clone(),
                detail: detail.to_owned(),
                excerpt: lost.value.to_string(),
            });
        let lost = lost.chain(arrival.refusals.iter().cloned()).collect();
        self.queue.overflowed(lost);
    }

    /// Tells a change of condition, once.
    fn say(&mut self, condition: Condition) {
        if self.said == condition {
            return;
        }
        match &condition {
            Condition::Trouble(why) => tracing::warn!("{why}"),
            Condition::Well => tracing::info!("the edge nodes of Sparkplug are subscribed"),
            Condition::Starting | Condition::Noted(_) => {}
        }
        self.said = condition.clone();
        self.queue.set(condition);
    }
}
