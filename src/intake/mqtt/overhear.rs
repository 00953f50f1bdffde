//! Listening for a while without leaving a trace: no will, no publication, no session that stays, a
//! client id that nobody else has.

use std::time::Duration;

use crate::clock::Clock;
use crate::model::Time;
use crate::settings::Broker;
use crate::settings::connection::Secrets;

use super::link::{Heard, Link, Role};

/// How long the connection and the subscription may take; the connection itself gives up after 10 s.
const BEGIN: Duration = Duration::from_secs(20);

/// One message.
#[derive(Clone, Copy, Debug)]
pub struct Overheard<'m> {
    /// Its topic.
    pub topic: &'m str,
    /// Its payload.
    pub payload: &'m [u8],
    /// Whether the broker had kept it.
    pub retained: bool,
    /// When it arrived.
    pub now: Time,
}

/// Connects, subscribes to `filters` with QoS 0 and gives every message that comes within `listen` to
/// `each`. Answers with the filters that the broker refuses, each with the reason.
///
/// # Errors
/// Says in words for people why there is no connection, or why it ended early.
pub async fn overhear(
    broker: &Broker,
    filters: &[String],
    listen: Duration,
    mut each: impl FnMut(Overheard<'_>),
) -> Result<Vec<String>, String> {
    let secrets = Secrets::read(broker).map_err(|error| error.to_string())?;
    let end = format!("-vet-{:04x}", fastrand::u16(..));
    let (mut link, speaker) = Link::new(broker, &secrets, Role::Aside(&end));
    let begin = async {
        loop {
            match link.next().await? {
                Heard::Connected { .. } if speaker.subscribe_aside(filters).is_err() => {
                    return Err("the topics cannot be subscribed".to_owned());
                }
                Heard::Subscribed(faults) => return Ok(faults),
                _ => {}
            }
        }
    };
    let late = || "the broker does not confirm the subscriptions".to_owned();
    let faults = tokio::time::timeout(BEGIN, begin)
        .await
        .map_err(|_| late())??;
    let listening = async {
        loop {
            if let Heard::Message(message) = link.next().await? {
                each(Overheard {
                    topic: &message.topic,
                    payload: &message.payload,
                    retained: message.retain,
                    now: Clock::System.now(),
                });
            }
        }
    };
    // Never ends by itself but with trouble.
    let ended: Result<Result<std::convert::Infallible, String>, _> =
        tokio::time::timeout(listen, listening).await;
    if let Ok(Err(why)) = ended {
        return Err(why);
    }
    if speaker.disconnect().is_ok() {
        let gone =
            async { while !matches!(link.next().await, Ok(Heard::Disconnected) | Err(_)) {} };
        // Whether or not the broker has heard it, the session ends with the connection.
        let _ = tokio::time::timeout(Duration::from_secs(1), gone).await;
    }
    let refused = filters.iter().zip(faults);
    Ok(refused
        .filter_map(|(filter, why)| Some(format!("{filter} ({})", why?)))
        .collect())
}
