//! The task that listens: connect, subscribe, hand on, acknowledge, and after trouble again.

use std::collections::VecDeque;
use std::future::Future;
use std::pin::{Pin, pin};
use std::sync::Arc;
use std::time::Duration;

use tokio::sync::mpsc;
use tokio_util::sync::CancellationToken;

use crate::clock::{Clock, Stopwatch};
use crate::engine::Condition;
use crate::intake::arrival::{self, Arrival, Decoder, Receipt};
use crate::model::Reason;
use crate::settings::Settings;
use crate::settings::connection::{Backoff, Secrets};

use super::drops::{self, Drops};
use super::ledger::{Delivery, Ledger};
use super::link::{Heard, Link, Message, Retained, Role, Speaker};
use super::queue::Queue;
use super::{FromBroker, IntakeError};

/// How long a broker may take to confirm the subscriptions.
const CONFIRM: Duration = Duration::from_secs(30);
/// How long to wait for last receipts, and for the farewell to be sent.
const DRAIN: Duration = Duration::from_secs(1);

/// Everything the task owns.
pub(super) struct Listener {
    settings: Arc<Settings>,
    clock: Clock,
    /// Where the broker is, for people.
    place: String,
    decoder: Decoder,
    ledger: Ledger,
    queue: Queue,
    drops: Drops,
    /// Packet ids to acknowledge on this connection that found the requests full.
    unsent: VecDeque<u16>,
    /// Set while there is a connection or one is being made.
    speaker: Option<Speaker>,
    /// What was said last.
    said: Condition,
    feed: mpsc::Sender<FromBroker>,
    receipts: mpsc::Receiver<Vec<Receipt>>,
    receipts_open: bool,
    shutdown: CancellationToken,
}

/// Why waiting ended early.
enum Stop {
    Shutdown,
    NobodyTakes,
}

/// How a connection ended.
enum End {
    Stop(Stop),
    /// What is wrong, in words.
    Lost(String),
}

impl From<Stop> for End {
    fn from(stop: Stop) -> Self {
        Self::Stop(stop)
    }
}

/// How far a connection has come.
#[derive(Clone, Copy)]
enum Stage {
    Connecting,
    /// Waiting for the confirmation of the subscriptions.
    Subscribing(Stopwatch),
    Listening(Stopwatch),
}

impl Stage {
    /// How long the connection has worked.
    fn lasted(self) -> Duration {
        match self {
            Self::Connecting | Self::Subscribing(_) => Duration::ZERO,
            Self::Listening(since) => since.elapsed(),
        }
    }
}

impl Listener {
    pub(super) fn new(
        settings: Arc<Settings>,
        already: Vec<(u16, u64)>,
        feed: mpsc::Sender<FromBroker>,
        receipts: mpsc::Receiver<Vec<Receipt>>,
        shutdown: CancellationToken,
    ) -> Self {
        Self {
            place: format!("{}:{}", settings.broker.host, settings.broker.port),
            decoder: Decoder::new(settings.feeds.clone(), settings.broker.most_bytes),
            ledger: Ledger::new(already),
            queue: Queue::new(settings.broker.receive_maximum),
            drops: Drops::default(),
            settings,
            clock: Clock::System,
            unsent: VecDeque::new(),
            speaker: None,
            said: Condition::Starting,
            feed,
            receipts,
            receipts_open: true,
            shutdown,
        }
    }

    pub(super) async fn run(mut self) -> Result<(), IntakeError> {
        let mut backoff = Backoff::default();
        loop {
            let mut stage = Stage::Connecting;
            let end = self.connection(&mut stage).await;
            self.speaker = None;
            self.unsent.clear();
            self.drops.disconnected();
            let stop = match end {
                End::Stop(stop) => Some(stop),
                End::Lost(why) => {
                    self.trouble(&why);
                    let wait = backoff.wait_after(stage.lasted());
                    self.until(pin!(tokio::time::sleep(wait))).await.err()
                }
            };
            match stop {
                None => {}
                Some(Stop::Shutdown) => return Ok(()),
                Some(Stop::NobodyTakes) => return Err(IntakeError::NobodyTakes),
            }
        }
    }

    /// One connection from its making to its end.
    async fn connection(&mut self, stage: &mut Stage) -> End {
        let settings = self.settings.clone();
        let read = tokio::task::spawn_blocking(move || Secrets::read(&settings.broker));
        let secrets = match self.until(pin!(read)).await {
            Ok(Ok(Ok(secrets))) => secrets,
            Ok(Ok(Err(error))) => return End::Lost(error.to_string()),
            Ok(Err(error)) => return End::Lost(error.to_string()),
            Err(stop) => return stop.into(),
        };
        let (mut link, speaker) = Link::new(&self.settings.broker, &secrets, Role::Measurements);
        self.speaker = Some(speaker);
        let end = match self.listen(&mut link, stage).await {
            Ok(never) => match never {},
            Err(end) => end,
        };
        if matches!(end, End::Stop(Stop::Shutdown)) && !matches!(stage, Stage::Connecting) {
            self.farewell(&mut link).await;
        }
        end
    }

    /// Takes what the connection brings until it ends.
    async fn listen(
        &mut self,
        link: &mut Link,
        stage: &mut Stage,
    ) -> Result<std::convert::Infallible, End> {
        loop {
            while self.queue.is_full() {
                self.pump().await?;
            }
            // The future of one poll is kept until it is done: dropping it halfway could lose a
            // request that was taken from its queue and not yet written.
            let heard = self.until(pin!(link.next())).await?;
            match heard.map_err(End::Lost)? {
                Heard::Connected { session_present } => {
                    self.connected(session_present)?;
                    *stage = Stage::Subscribing(Stopwatch::start());
                }
                // Asked for second, so answered second.
                Heard::Subscribed(_) if matches!(stage, Stage::Listening(_)) => {
                    self.drops.answered();
                }
                Heard::Subscribed(faults) => {
                    *stage = Stage::Listening(Stopwatch::start());
                    self.subscribed(&faults);
                }
                Heard::Message(message) if message.topic == drops::TOPIC => {
                    self.count_dropped(&message);
                }
                Heard::Message(message) => self.message(&message),
                Heard::Disconnected | Heard::Nothing => {}
            }
            self.hand_on();
            self.acknowledge();
            if matches!(stage, Stage::Subscribing(since) if since.elapsed() > CONFIRM) {
                let why = "the broker does not confirm the subscriptions";
                return Err(End::Lost(why.to_owned()));
            }
        }
    }

    /// Subscribes, on every connection.
    fn connected(&mut self, session_present: bool) -> Result<(), End> {
        if !session_present && self.ledger.has_connected() {
            tracing::warn!(
                broker = self.place,
                "the broker kept no session; what was published since the last connection is lost"
            );
        }
        self.ledger.connected(session_present);
        tracing::info!(
            broker = self.place,
            session_present,
            "connected to the broker, subscribing"
        );
        let filters = self.decoder.filters();
        let sent = self
            .speaker
            .as_ref()
            .map(|speaker| speaker.subscribe(filters, Retained::Unwanted));
        match sent {
            Some(Ok(())) => Ok(()),
            _ => Err(End::Lost(format!(
                "the topics cannot be subscribed: {}",
                filters.join(", ")
            ))),
        }
    }

    fn subscribed(&mut self, faults: &[Option<&'static str>]) {
        let filters = self.decoder.filters().iter();
        let refused: Vec<String> = filters
            .zip(faults)
            .filter_map(|(filter, fault)| fault.map(|why| format!("{filter} ({why})")))
            .collect();
        if refused.is_empty() {
            self.say(Condition::Well);
        } else {
            self.trouble(&format!(
                "the broker refuses to deliver {}; check its access list",
                refused.join(", ")
            ));
        }
        if let Some(speaker) = self.speaker.as_ref().filter(|_| self.drops.wants()) {
            // Without room for it now, the count is watched from the next connection on.
            let _ = speaker.subscribe(&[drops::TOPIC.to_owned()], Retained::Wanted);
        }
    }

    /// Says when the broker has dropped messages. Under a filter of ours that matches the topic too
    /// it may come with QoS 1; then it is acknowledged at once, as there is nothing to keep.
    fn count_dropped(&mut self, message: &Message) {
        self.unsent.extend(message.packet);
        if let Some(messages) = self.drops.heard(&message.payload) {
            tracing::warn!(
                broker = self.place,
                messages,
                "the broker has dropped messages that a slow or absent client had not taken; measurements may be among them; raise max_queued_messages in its configuration"
            );
        }
    }

    fn message(&mut self, message: &Message) {
        let Message {
            topic,
            payload,
            packet,
            dup,
            retain,
        } = message;
        let hash = arrival::hash(topic, payload);
        let refuse = |decoder: &mut Decoder, receipt, reason, detail| Arrival {
            measurements: Vec::new(),
            refusals: decoder.refusals(topic, payload, reason, detail),
            receipt,
        };
        let arrival = match self.ledger.delivered(*packet, hash, *dup) {
            Delivery::UnderWay => return,
            Delivery::Durable(receipt) => {
                let detail = "the broker delivered it again, and it was durable already";
                refuse(&mut self.decoder, receipt, Reason::Redelivered, detail)
            }
            Delivery::Fresh(receipt) if *retain => {
                let detail = "the message was retained by the broker; publish measurements without the retain flag";
                refuse(&mut self.decoder, receipt, Reason::Retained, detail)
            }
            Delivery::Fresh(receipt) if packet.is_none() && !self.queue.has_share() => {
                let detail = "it came with QoS 0 faster than measurements can be kept; publish with QoS 1, then the broker waits";
                let lost = refuse(&mut self.decoder, receipt, Reason::Overflow, detail);
                self.queue.overflowed(lost.refusals);
                return;
            }
            Delivery::Fresh(receipt) => {
                let now = self.clock.now();
                self.decoder.decode(topic, payload, receipt, now)
            }
        };
        self.queue.push(arrival);
    }

    fn trouble(&mut self, why: &str) {
        self.say(Condition::Trouble(format!("{why} ({})", self.place)));
    }

    /// Tells a change of condition, once.
    fn say(&mut self, condition: Condition) {
        if self.said == condition {
            return;
        }
        match &condition {
            Condition::Trouble(why) => tracing::warn!("{why}"),
            Condition::Well => tracing::info!("every subscription is confirmed"),
            Condition::Starting | Condition::Noted(_) => {}
        }
        self.said = condition.clone();
        self.queue.set(condition);
    }

    /// Gives the engine what it has room for, without waiting.
    fn hand_on(&mut self) {
        while !self.queue.is_empty() {
            let Ok(permit) = self.feed.try_reserve() else {
                return;
            };
            if let Some(next) = self.queue.pop() {
                permit.send(next);
            }
        }
    }

    fn take(&mut self, receipts: Vec<Receipt>) {
        let packets = receipts
            .into_iter()
            .filter_map(|receipt| self.ledger.durable(receipt));
        self.unsent.extend(packets);
        self.acknowledge();
    }

    /// Sends the acknowledgements that the connection has room for. Each one that goes out wakes
    /// the connection's task, so the rest follows.
    fn acknowledge(&mut self) {
        let Some(speaker) = &self.speaker else {
            self.unsent.clear();
            return;
        };
        while let Some(&packet) = self.unsent.front() {
            if speaker.acknowledge(packet).is_err() {
                return;
            }
            self.unsent.pop_front();
        }
    }

    /// Waits for `future`; meanwhile the engine is served and receipts are taken.
    async fn until<F: Future>(&mut self, mut future: Pin<&mut F>) -> Result<F::Output, Stop> {
        loop {
            tokio::select! {
                out = &mut future => return Ok(out),
                pumped = self.pump() => pumped?,
            }
        }
    }

    /// Does one thing that is not the connection's: may be dropped while it waits.
    async fn pump(&mut self) -> Result<(), Stop> {
        let receipts = tokio::select! {
            biased;
            () = self.shutdown.cancelled() => return Err(Stop::Shutdown),
            room = self.feed.reserve(), if !self.queue.is_empty() => {
                room.map_err(|_| Stop::NobodyTakes)?;
                None
            }
            receipts = self.receipts.recv(), if self.receipts_open => {
                self.receipts_open = receipts.is_some();
                receipts
            }
            () = self.feed.closed() => return Err(Stop::NobodyTakes),
        };
        match receipts {
            Some(receipts) => self.take(receipts),
            None => self.hand_on(),
        }
        Ok(())
    }

    /// Acknowledges what still becomes durable, then says farewell. What was not handed on is not
    /// acknowledged and comes again in the next session.
    async fn farewell(&mut self, link: &mut Link) {
        let drained = tokio::time::timeout(DRAIN, async {
            while self.receipts_open {
                let mut next = pin!(link.next());
                // As in `listen`, one poll is seen through to its end, unless nothing follows.
                loop {
                    tokio::select! {
                        heard = &mut next => match heard {
                            Ok(_) => break,
                            Err(_) => return,
                        },
                        receipts = self.receipts.recv(), if self.receipts_open => match receipts {
                            Some(receipts) => self.take(receipts),
                            None => { self.receipts_open = false; break; }
                        },
                    }
                }
                self.acknowledge();
            }
        });
        if drained.await.is_err() {
            tracing::debug!("receipts were still open when the connection was closed");
        }
        let Some(speaker) = &self.speaker else {
            return;
        };
        if speaker.disconnect().is_err() {
            return;
        }
        let gone = tokio::time::timeout(DRAIN, async {
            while !matches!(link.next().await, Ok(Heard::Disconnected) | Err(_)) {}
        });
        if gone.await.is_err() {
            tracing::debug!("the broker did not take the farewell in time");
        }
    }
}
