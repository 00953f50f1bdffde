//! The door to the house: deliveries come in, reports go out, and the wish to end is heard.

use std::collections::VecDeque;
use std::time::Duration;

use tokio::sync::mpsc;
use tokio_util::sync::CancellationToken;

use crate::notice::Delivery;

use super::{OutletError, Report};

/// How long a last report may take.
const REPORT_WITHIN: Duration = Duration::from_millis(500);

/// An outlet's ends of the house's channels.
pub struct Door {
    deliveries: mpsc::Receiver<Delivery>,
    reports: mpsc::Sender<Report>,
    shutdown: CancellationToken,
    unreported: VecDeque<Report>,
    more_may_come: bool,
    is_ending: bool,
}

/// What came through the door.
pub enum Came {
    /// A delivery.
    Delivery(Delivery),
    /// Nothing that concerns the outlet.
    Nothing,
    /// It is time to end; told once.
    End,
}

impl Door {
    /// The door with these channels.
    pub fn new(
        deliveries: mpsc::Receiver<Delivery>,
        reports: mpsc::Sender<Report>,
        shutdown: CancellationToken,
    ) -> Self {
        Self {
            deliveries,
            reports,
            shutdown,
            unreported: VecDeque::new(),
            more_may_come: true,
            is_ending: false,
        }
    }

    /// One thing for the house. Dropped half-way it loses nothing.
    ///
    /// # Errors
    /// When nobody takes the reports any more.
    pub async fn next(&mut self) -> Result<Came, OutletError> {
        let ending = self.is_ending;
        tokio::select! {
            biased;
            delivery = self.deliveries.recv(), if self.more_may_come => {
                if let Some(delivery) = delivery {
                    return Ok(Came::Delivery(delivery));
                }
                self.more_may_come = false;
            }
            permit = self.reports.reserve(), if !self.unreported.is_empty() => {
                let permit = permit.map_err(|_| OutletError::ReportsClosed)?;
                if let Some(report) = self.unreported.pop_front() {
                    permit.send(report);
                }
            }
            () = self.shutdown.cancelled(), if !ending => self.is_ending = true,
            () = std::future::ready(()), if !self.more_may_come && !ending => self.is_ending = true,
            // With nothing left to serve the outlet's own work goes on.
            () = std::future::pending() => {}
        }
        Ok(match (ending, self.is_ending) {
            (false, true) => Came::End,
            _ => Came::Nothing,
        })
    }

    /// Notes what is to be reported.
    pub fn report(&mut self, report: Report) {
        self.unreported.push_back(report);
    }

    /// The last reports, as far as the house still takes them: what is not reported is sent again
    /// after the next start.
    pub async fn close(&mut self) {
        while let Some(report) = self.unreported.pop_front() {
            let sent = self.reports.send_timeout(report, REPORT_WITHIN).await;
            if sent.is_err() {
                break;
            }
        }
    }
}
