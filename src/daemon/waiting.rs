//! Waits for whatever comes next and makes turns of it. All waiting is here, all applying in
//! [`super::house`].

use std::time::Duration;

use tokio::sync::mpsc;
use tokio_util::sync::CancellationToken;

use crate::engine::{Event, Part};
use crate::intake::mqtt::{Arrival, FromBroker};
use crate::outlets::Report;
use crate::web::Ask;

use super::house::{House, Pending};
use super::{MOST_ARRIVALS, MOST_MEASUREMENTS, MOST_WAITING, RunError};

/// The clock on the wall can be set; whatever is due is looked for again after this long.
const LONGEST_IDLE: Duration = Duration::from_secs(1);
/// A deadline that stays due would otherwise keep everything else from being served.
const SHORTEST_IDLE: Duration = Duration::from_millis(2);

/// How long the outlet's last confirmations are waited for; it has two seconds for its own end.
const LAST_REPORTS_WITHIN: Duration = Duration::from_millis(2_500);

/// Where everything comes from.
pub(super) struct Inputs {
    /// Measurements, and the broker's condition.
    pub(super) feed: mpsc::Receiver<FromBroker>,
    /// Commands.
    pub(super) asks: mpsc::Receiver<Ask>,
    /// What became of deliveries.
    pub(super) reports: mpsc::Receiver<Report>,
}

/// What came.
enum Came {
    Feed(Vec<FromBroker>),
    Ask(Ask),
    Reports(Vec<Report>),
    /// Something may be due.
    Due,
    End,
}

/// Applies turns until the end is wanted, then lets everything be kept.
///
/// # Errors
/// When the store could not keep the last turn.
pub(super) async fn turns(
    mut house: House,
    mut inputs: Inputs,
    end: CancellationToken,
) -> Result<(), RunError> {
    house.begin(&end).await?;
    loop {
        house.chores(&end).await?;
        let pending = match inputs.next(house.idle(), &end).await {
            Came::End => break,
            Came::Due => continue,
            Came::Feed(all) => arrivals(all),
            Came::Ask(ask) => Pending {
                events: vec![house.command(ask)],
                ..Pending::default()
            },
            Came::Reports(all) => Pending {
                events: all.into_iter().map(event_of).collect(),
                ..Pending::default()
            },
        };
        house.turn(pending, &end).await?;
    }
    let last = house.finish(&end).await?;
    // Whoever still asks is told at once that nobody answers any more.
    let Inputs {
        feed,
        asks,
        reports,
    } = inputs;
    drop(asks);
    let confirmed = last_reports(reports).await;
    // The feed stays open until here: a connection that ends needs no reader, but must not miss it.
    drop(feed);
    last.confirm(confirmed)
}

impl Inputs {
    async fn next(&mut self, idle: Option<Duration>, end: &CancellationToken) -> Came {
        let idle = idle.map_or(LONGEST_IDLE, |i| i.clamp(SHORTEST_IDLE, LONGEST_IDLE));
        let mut reports = Vec::new();
        tokio::select! {
            () = end.cancelled() => Came::End,
            Some(ask) = self.asks.recv() => Came::Ask(ask),
            1.. = self.reports.recv_many(&mut reports, MOST_WAITING) => Came::Reports(reports),
            Some(first) = self.feed.recv() => Came::Feed(self.with_waiting(first)),
            () = tokio::time::sleep(idle) => Came::Due,
        }
    }
}

impl Inputs {
    /// What waits behind the first, as far as one turn may hold.
    fn with_waiting(&mut self, first: FromBroker) -> Vec<FromBroker> {
        let mut held = measurements_in(&first);
        let mut all = vec![first];
        while all.len() < MOST_ARRIVALS && held < MOST_MEASUREMENTS {
            let Ok(next) = self.feed.try_recv() else {
                break;
            };
            held += measurements_in(&next);
            all.push(next);
        }
        all
    }
}

fn measurements_in(one: &FromBroker) -> usize {
    match one {
        FromBroker::Arrival(arrival) => arrival.measurements.len(),
        FromBroker::Condition(_) => 0,
    }
}

/// One turn of arrivals; the broker's condition keeps its place among them.
fn arrivals(all: Vec<FromBroker>) -> Pending {
    let mut pending = Pending::default();
    let (mut measurements, mut refusals) = (Vec::new(), Vec::new());
    let flush = |events: &mut Vec<Event>, m: &mut Vec<_>, r: &mut Vec<_>| {
        if !m.is_empty() {
            events.push(Event::Measurements(std::mem::take(m)));
        }
        if !r.is_empty() {
            events.push(Event::Refusals(std::mem::take(r)));
        }
    };
    for one in all {
        match one {
            FromBroker::Arrival(Arrival {
                measurements: some,
                refusals: refused,
                receipt,
            }) => {
                measurements.extend(some);
                refusals.extend(refused);
                pending.receipts.push(receipt);
            }
            FromBroker::Condition(condition) => {
                flush(&mut pending.events, &mut measurements, &mut refusals);
                let part = Part::Broker;
                pending.events.push(Event::Condition { part, condition });
            }
        }
    }
    flush(&mut pending.events, &mut measurements, &mut refusals);
    pending
}

fn event_of(report: Report) -> Event {
    match report {
        Report::Delivered(number) => Event::Delivered { number },
        Report::NotDelivered { number, why } => Event::NotDelivered { number, why },
    }
}

/// What the outlet still confirms while it ends.
async fn last_reports(mut reports: mpsc::Receiver<Report>) -> Vec<Event> {
    let mut confirmed = Vec::new();
    let all = async {
        while let Some(report) = reports.recv().await {
            if let Report::Delivered(number) = report {
                confirmed.push(Event::Delivered { number });
            }
        }
    };
    // What comes later is delivered once more after the next start.
    let _ = tokio::time::timeout(LAST_REPORTS_WITHIN, all).await;
    confirmed
}
