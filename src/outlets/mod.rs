//! Notices on their way out.
//!
//! An outlet takes deliveries, sends them, and reports each one that the other side has confirmed;
//! what is not confirmed it sends again, so a receiver may see a repeat and never misses one. The
//! order of one notice's deliveries is kept.
//!
//! | part | what it is for |
//! | --- | --- |
//! | [`mqtt`] | to the plant's broker, always |
//! | `webhook`, `mail`, `command` | the ways that outlets of the configuration use |
//! | `postman` | what those three have in common: lanes, pace, retries, the door to the house |
//! | `letter`, `cloud_event`, `sign` | the form of what leaves |
//!
//! Deliberately absent: deciding what is sent, and keeping it over a restart; the engine does the one
//! and the store the other.

mod cloud_event;
mod command;
mod door;
mod lanes;
mod letter;
mod mail;
pub mod mqtt;
mod pace;
mod postman;
mod queue;
mod retry;
mod sign;
mod topic;
mod webhook;

use tokio::sync::mpsc;
use tokio_util::sync::CancellationToken;

use crate::notice::{Delivery, Notice};
use crate::settings::{Means, Outlet};

use command::CommandCarrier;
use door::Door;
use letter::Letter;
use mail::MailCarrier;
use postman::{Carrier, Postman};
use webhook::WebhookCarrier;

/// What an outlet tells the house about a delivery.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Report {
    /// The other side has confirmed it.
    Delivered(u64),
    /// It could not be sent; the outlet keeps it and tries again.
    NotDelivered {
        /// [`crate::notice::Delivery::number`].
        number: u64,
        /// Why, for people.
        why: String,
    },
}

/// Why an outlet stopped before it was asked to.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum OutletError {
    /// Nobody takes the reports any more, so nothing could be taken off the list of what is owed.
    #[error("nobody takes the reports of the outlet for notices")]
    ReportsClosed,
}

/// The picture of a notice for people, as SVG; `None` where there is none.
pub type Picture = std::sync::Arc<dyn Fn(&Notice) -> Option<String> + Send + Sync>;

/// Sends what comes in on `deliveries` by an outlet of the configuration and reports on `reports`,
/// until `shutdown`, or until nobody sends deliveries any more. `picture` is what mail shows.
///
/// # Errors
/// When nobody takes the reports any more.
pub async fn run(
    outlet: Outlet,
    picture: Picture,
    deliveries: mpsc::Receiver<Delivery>,
    reports: mpsc::Sender<Report>,
    shutdown: CancellationToken,
) -> Result<(), OutletError> {
    let door = Door::new(deliveries, reports, shutdown);
    let (name, at_most) = (outlet.name.clone(), outlet.at_most);
    let postman = |schedule| Postman::new(name, at_most, schedule, door);
    match &outlet.means {
        Means::Webhook(webhook) => {
            let carrier = WebhookCarrier::new(&outlet, webhook);
            postman(retry::WEBHOOK).walk(&carrier).await
        }
        Means::Mail(mail) => {
            let carrier = MailCarrier::new(&outlet, mail, picture);
            postman(retry::OWN).walk(&carrier).await
        }
        Means::Command(program) => {
            let carrier = CommandCarrier::new(&outlet, program);
            postman(retry::OWN).walk(&carrier).await
        }
    }
}

/// Sends one notice that is marked as a test, once.
///
/// # Errors
/// Why it did not arrive, for people.
pub async fn send_test(outlet: &Outlet, delivery: Delivery) -> Result<(), String> {
    let letter = Letter::test(delivery);
    let none: Picture = std::sync::Arc::new(|_| None);
    let sent = match &outlet.means {
        Means::Webhook(webhook) => WebhookCarrier::new(outlet, webhook).carry(&letter).await,
        Means::Mail(mail) => MailCarrier::new(outlet, mail, none).carry(&letter).await,
        Means::Command(program) => CommandCarrier::new(outlet, program).carry(&letter).await,
    };
    sent.map_err(|failure| failure.why)
}
