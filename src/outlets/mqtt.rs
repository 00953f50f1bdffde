//! Notices to the plant's broker, over a connection of their own.
//!
//! Owns the connection with the client id `{client_id}-notices` and the last will. What must hold:
//! one publication is under way at a time, so the order is the order of the queue and a
//! confirmation is beyond doubt about which publication it means (a plant has few notices, and a
//! round trip is cheap); a delivery is reported done only when the broker has confirmed it; the
//! house is never kept waiting, whatever the broker does. A notice is retained while it is open and
//! its topic is emptied when it is normal.

mod link;
mod trial;

use std::sync::Arc;
use std::time::Duration;

use serde::Serialize;
use tokio::sync::mpsc;
use tokio_util::sync::CancellationToken;
use tracing::{debug, info, warn};

use crate::clock::{Clock, Stopwatch};
use crate::model::Time;
use crate::notice::{Delivery, State};
use crate::settings::Settings;
use crate::settings::connection::{Backoff, Secrets};

pub use trial::send_test;

use self::link::{Driver, Message, Signal, Speaker};
use super::door::{Came, Door};
use super::queue::Queue;
use super::{OutletError, Report, cloud_event, topic};

/// A broker that answers pings and leaves a publication unconfirmed this long is given up on.
const CONFIRM_WITHIN: Duration = Duration::from_secs(20);

/// How long the end may take: the whole program has 5 seconds.
const END_WITHIN: Duration = Duration::from_secs(2);

/// Sends what comes in on `deliveries` and reports on `reports`, until `shutdown`, or until nobody
/// sends deliveries any more; then what waits is sent as far as two seconds allow.
///
/// # Errors
/// When nobody takes the reports any more.
pub async fn run(
    settings: Arc<Settings>,
    deliveries: mpsc::Receiver<Delivery>,
    reports: mpsc::Sender<Report>,
    shutdown: CancellationToken,
) -> Result<(), OutletError> {
    let mut outlet = Outlet {
        settings,
        door: Door::new(deliveries, reports, shutdown),
        clock: Clock::System,
        queue: Queue::default(),
        complaint: None,
        ending: None,
    };
    let mut backoff = Backoff::default();
    loop {
        let stood = match outlet.connection().await? {
            Ended::AsAsked => break,
            Ended::Lost { why, stood } => {
                outlet.complain(why);
                stood
            }
        };
        if outlet.ending.is_some() || outlet.pause(backoff.wait_after(stood)).await? == House::End {
            break;
        }
    }
    outlet.door.close().await;
    Ok(())
}

/// How a connection ended.
enum Ended {
    AsAsked,
    Lost { why: String, stood: Duration },
}

/// What came from the house.
#[derive(PartialEq, Eq)]
enum House {
    /// A delivery was taken in or a report handed over.
    Served,
    /// It is time to end.
    End,
}

/// What has been published and is not confirmed yet.
#[derive(Clone, Copy, PartialEq, Eq)]
enum UnderWay {
    Nothing,
    Status,
    Notice,
    Goodbye,
}

struct Outlet {
    settings: Arc<Settings>,
    door: Door,
    clock: Clock,
    queue: Queue,
    /// The number and reason last complained of, so that each is told once.
    complaint: Option<(Option<u64>, String)>,
    /// Runs once the end was asked for.
    ending: Option<Stopwatch>,
}

impl Outlet {
    /// One connection from its opening to its end.
    async fn connection(&mut self) -> Result<Ended, OutletError> {
        let broker = &self.settings.broker;
        let secrets = match Secrets::read(broker) {
            Ok(secrets) => secrets,
            Err(e) => {
                let (why, stood) = (e.to_string(), Duration::ZERO);
                return Ok(Ended::Lost { why, stood });
            }
        };
        let client_id = format!("{}-notices", broker.client_id);
        let (speaker, mut driver) = link::open(broker, &client_id, &secrets, self.status("lost"));
        let mut talk = Talk {
            speaker,
            connected: None,
            under_way: UnderWay::Nothing,
            published: Stopwatch::start(),
        };
        self.queue.lost();
        loop {
            let end = match self.next_signal(&mut driver, &mut talk).await? {
                Next::Signal(signal) => self.act(signal, &mut talk),
                Next::Lost(why) => Err(why),
                Next::TimeIsUp => return Ok(Ended::AsAsked),
            };
            match end {
                Ok(Go::On) => {}
                Ok(Go::Leave) => {
                    leave(&mut driver, &talk).await;
                    return Ok(Ended::AsAsked);
                }
                Err(why) => {
                    let stood = talk.connected.map_or(Duration::ZERO, Stopwatch::elapsed);
                    return Ok(Ended::Lost { why, stood });
                }
            }
        }
    }

    /// What a signal means; an error is why this connection is of no more use.
    fn act(&mut self, signal: Signal, talk: &mut Talk) -> Result<Go, String> {
        match signal {
            Signal::Connected => {
                let broker = &self.settings.broker;
                info!("notices go to {}:{}", broker.host, broker.port);
                talk.connected = Some(Stopwatch::start());
                talk.publish(self.status("running"), UnderWay::Status)?;
            }
            Signal::Confirmed => match talk.confirmed() {
                UnderWay::Goodbye => return Ok(Go::Leave),
                UnderWay::Notice => {
                    for number in self.queue.confirmed() {
                        self.door.report(Report::Delivered(number));
                    }
                    self.complaint = None;
                }
                // A broker may take the status and no notices, so that alone is no success.
                UnderWay::Status if self.queue.len() == 0 => self.complaint = None,
                UnderWay::Status | UnderWay::Nothing => {}
            },
            Signal::Denied(why) => match talk.under_way {
                // A broker may refuse the status and take the notices, which matter.
                UnderWay::Status => {
                    warn!("the broker refuses the status: {why}");
                    talk.confirmed();
                }
                UnderWay::Goodbye => return Ok(Go::Leave),
                UnderWay::Notice | UnderWay::Nothing => return Err(why),
            },
            Signal::Disconnected | Signal::Other => {}
        }
        self.go_on(talk)?;
        Ok(Go::On)
    }

    /// Waits for the connection while serving the house. The poll is one future throughout: dropping
    /// it while a connection is being made would start that over with each delivery.
    async fn next_signal(
        &mut self,
        driver: &mut Driver,
        talk: &mut Talk,
    ) -> Result<Next, OutletError> {
        let polled = driver.poll();
        tokio::pin!(polled);
        loop {
            let unconfirmed = talk.under_way != UnderWay::Nothing;
            let confirm = CONFIRM_WITHIN.saturating_sub(talk.published.elapsed());
            let end = self.ending.map(|e| END_WITHIN.saturating_sub(e.elapsed()));
            tokio::select! {
                signal = &mut polled => return Ok(match signal {
                    Ok(signal) => Next::Signal(signal),
                    Err(why) => Next::Lost(why),
                }),
                house = self.house() => {
                    if house? == House::End {
                        self.ending = Some(Stopwatch::start());
                        if talk.connected.is_none() {
                            return Ok(Next::TimeIsUp);
                        }
                    }
                    if let Err(why) = self.go_on(talk) {
                        return Ok(Next::Lost(why));
                    }
                }
                () = tokio::time::sleep(confirm), if unconfirmed => {
                    return Ok(Next::Lost("the broker does not confirm what is published".to_owned()));
                }
                () = tokio::time::sleep(end.unwrap_or_default()), if end.is_some() => return Ok(Next::TimeIsUp),
            }
        }
    }

    /// Publishes what is next, when nothing is under way.
    fn go_on(&mut self, talk: &mut Talk) -> Result<(), String> {
        if talk.connected.is_none() || talk.under_way != UnderWay::Nothing {
            return Ok(());
        }
        if let Some(delivery) = self.queue.send_head() {
            return talk.publish(message(delivery), UnderWay::Notice);
        }
        if self.ending.is_some() {
            return talk.publish(self.status("ended"), UnderWay::Goodbye);
        }
        Ok(())
    }

    /// One thing for the house: a delivery, a report, or the wish to end. Dropped half-way it loses
    /// nothing.
    async fn house(&mut self) -> Result<House, OutletError> {
        match self.door.next().await? {
            Came::Delivery(delivery) => self.queue.push(delivery),
            Came::End => return Ok(House::End),
            Came::Nothing => {}
        }
        Ok(House::Served)
    }

    /// Serves the house until the wait is over.
    async fn pause(&mut self, wait: Duration) -> Result<House, OutletError> {
        let over = tokio::time::sleep(wait);
        tokio::pin!(over);
        loop {
            tokio::select! {
                house = self.house() => {
                    if house? == House::End {
                        return Ok(House::End);
                    }
                }
                () = &mut over => return Ok(House::Served),
            }
        }
    }

    /// Tells log and house about a failure, once for each reason and delivery.
    fn complain(&mut self, why: String) {
        let number = self.queue.head();
        let told = self.complaint.as_ref();
        if told.is_none_or(|(_, before)| *before != why) {
            let waiting = self.queue.len();
            warn!("notices cannot be sent ({waiting} wait and will be): {why}");
        } else {
            debug!("notices still cannot be sent: {why}");
        }
        let now = Some((number, why.clone()));
        if let Some(number) = number
            && self.complaint != now
        {
            self.door.report(Report::NotDelivered { number, why });
        }
        self.complaint = now;
    }

    /// What stands on the status topic.
    fn status(&self, state: &'static str) -> Message {
        let status = Status {
            state,
            at: self.clock.now(),
            version: env!("CARGO_PKG_VERSION"),
        };
        Message {
            topic: topic::status(&self.settings.plant.name),
            payload: serde_json::to_vec(&status).unwrap_or_else(|_| state.into()),
            content_type: "application/json",
        }
    }
}

/// What comes next in a connection.
enum Next {
    Signal(Signal),
    Lost(String),
    TimeIsUp,
}

/// Whether a connection is still wanted.
enum Go {
    On,
    Leave,
}

/// A connection's state.
struct Talk {
    speaker: Speaker,
    /// Runs since the broker accepted us.
    connected: Option<Stopwatch>,
    under_way: UnderWay,
    /// Runs since the last publication.
    published: Stopwatch,
}

impl Talk {
    fn publish(&mut self, message: Message, what: UnderWay) -> Result<(), String> {
        self.speaker.publish(message)?;
        self.under_way = what;
        self.published = Stopwatch::start();
        Ok(())
    }

    /// What the broker has just confirmed.
    fn confirmed(&mut self) -> UnderWay {
        std::mem::replace(&mut self.under_way, UnderWay::Nothing)
    }
}

/// Says goodbye and waits until that has left. A broker that does not take it tells the others
/// "lost", which is no loss to us, so nothing here is an error.
async fn leave(driver: &mut Driver, talk: &Talk) {
    if talk.speaker.disconnect().is_err() {
        return;
    }
    let goodbye = async {
        while let Ok(signal) = driver.poll().await {
            if signal == Signal::Disconnected {
                break;
            }
        }
    };
    let _ = tokio::time::timeout(END_WITHIN / 4, goodbye).await;
}

/// `running` since `at`, `ended` on purpose at `at`, or `lost`: the connection made at `at` broke.
#[derive(Serialize)]
struct Status {
    state: &'static str,
    at: Time,
    version: &'static str,
}

fn message(delivery: &Delivery) -> Message {
    let payload = match delivery.notice.state {
        State::Normal => Vec::new(),
        _ => cloud_event::encode(delivery),
    };
    Message {
        topic: topic::notice(&delivery.notice),
        payload,
        content_type: cloud_event::CONTENT_TYPE,
    }
}
