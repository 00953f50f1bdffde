//! Prints each notice when it is raised and when it clears, as a receiver on the plant's broker
//! would learn of it.
//!
//! Owns what it last printed of each notice. Deliberately absent: deciding anything.

use std::collections::BTreeMap;

use serde::Deserialize;

use crate::notice::State;
use crate::verdict::Effect;

/// What the demo reads of a notice's event.
#[derive(Debug, Deserialize)]
struct Event {
    data: Data,
}

#[derive(Debug, Deserialize)]
struct Data {
    id: String,
    state: State,
    subject: String,
    #[serde(default)]
    adjustment: Option<Adjusted>,
}

#[derive(Debug, Deserialize)]
struct Adjusted {
    source: String,
    effect: Effect,
}

/// What was last printed of each notice.
#[derive(Debug, Default)]
pub struct Bulletin {
    last: BTreeMap<String, State>,
    effects: BTreeMap<String, Effect>,
}

impl Bulletin {
    /// A line for people when something arrived that they should hear of.
    pub fn line(&mut self, payload: &[u8]) -> Option<String> {
        // An emptied topic says that a notice is over; the event before said so in words.
        let data = serde_json::from_slice::<Event>(payload).ok()?.data;
        let before = self.last.insert(data.id.clone(), data.state);
        let became = self.became(&data);
        match happened(before, data.state) {
            Some(what) => Some(format!("{what}: {}", data.subject)),
            None => became,
        }
    }

    /// What became of an adjustment, once it is sure.
    fn became(&mut self, data: &Data) -> Option<String> {
        let Adjusted { source, effect } = data.adjustment.as_ref()?;
        let before = self.effects.insert(data.id.clone(), *effect);
        let news = *effect != Effect::NotSure && before != Some(*effect);
        news.then(|| format!("{source} after its adjustment: {}", effect.words()))
    }
}

/// The word for a change of state; `None` when there is nothing new to say.
fn happened(before: Option<State>, now: State) -> Option<&'static str> {
    let was_active = before.is_some_and(State::is_active);
    match (was_active, now) {
        (true, State::Acknowledged) if before != Some(State::Acknowledged) => Some("acknowledged"),
        (false, now) if now.is_active() => Some("notice"),
        (true, now) if !now.is_active() => Some("cleared"),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn each_turn_of_a_notice_is_told_once() {
        let mut bulletin = Bulletin::default();
        let mut told = |state: &str| {
            let payload = format!(
                r#"{{"specversion":"1.0","data":{{"id":"a-1","state":"{state}","subject":"07 low"}}}}"#
            );
            bulletin.line(payload.as_bytes())
        };
        let wanted = [
            ("unacknowledged", Some("notice: 07 low")),
            ("unacknowledged", None),
            ("acknowledged", Some("acknowledged: 07 low")),
            ("acknowledged", None),
            ("normal", Some("cleared: 07 low")),
            ("normal", None),
        ];
        for (state, line) in wanted {
            assert_eq!(told(state).as_deref(), line, "{state}");
        }
    }

    #[test]
    fn an_emptied_topic_and_rubbish_say_nothing() {
        for payload in ["", "{}", "not json", r#"{"data":{"id":1}}"#] {
            assert_eq!(Bulletin::default().line(payload.as_bytes()), None);
        }
    }
}
