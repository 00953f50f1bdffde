//! One test notice to the broker, beside a daemon that may be running: with a client id and a topic of
//! its own, so that neither the daemon's connection nor its status is touched.

use std::time::Duration;

use crate::notice::Delivery;
use crate::outlets::{cloud_event, topic};
use crate::settings::Broker;
use crate::settings::connection::Secrets;

use super::link::{self, Message, Signal};

/// Longer than connecting may take.
const WITHIN: Duration = Duration::from_secs(20);

/// Publishes the delivery and takes it back; `Ok` when the broker has confirmed both.
///
/// # Errors
/// Why the broker did not take it, for people.
pub async fn send_test(broker: &Broker, delivery: &Delivery) -> Result<(), String> {
    let sent = tokio::time::timeout(WITHIN, publish(broker, delivery)).await;
    sent.unwrap_or_else(|_| Err(format!("the broker did not confirm it within {WITHIN:?}")))
}

async fn publish(broker: &Broker, delivery: &Delivery) -> Result<(), String> {
    let secrets = Secrets::read(broker).map_err(|e| e.to_string())?;
    let message = |payload| Message {
        topic: topic::test(&delivery.notice.plant),
        payload,
        content_type: cloud_event::CONTENT_TYPE,
    };
    let client_id = format!("{}-test", broker.client_id);
    let (speaker, mut driver) = link::open(broker, &client_id, &secrets, message(Vec::new()));
    let mut to_come = vec![Vec::new(), cloud_event::encode_test(delivery)];
    loop {
        match driver.poll().await? {
            Signal::Connected | Signal::Confirmed => match to_come.pop() {
                Some(payload) => speaker.publish(message(payload))?,
                None => speaker.disconnect()?,
            },
            Signal::Denied(why) => return Err(why),
            Signal::Disconnected => return Ok(()),
            Signal::Other => {}
        }
    }
}
