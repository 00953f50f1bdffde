//! The envelope of a notice: CloudEvents 1.0.2 in JSON, structured mode
//! (github.com/cloudevents/spec, `formats/json-format.md`).

use serde::Serialize;

use crate::model::Time;
use crate::notice::{Delivery, NoticeData};

use super::topic;

/// The media type of an event in structured mode.
pub const CONTENT_TYPE: &str = "application/cloudevents+json";

#[derive(Serialize)]
struct Envelope<'a, D> {
    specversion: &'static str,
    id: String,
    source: String,
    #[serde(rename = "type")]
    kind: String,
    #[serde(skip_serializing_if = "Option::is_none")]
    subject: Option<&'a str>,
    time: Time,
    datacontenttype: &'static str,
    data: D,
}

/// What a digest carries: the events as each would have been sent by itself.
#[derive(Serialize)]
struct Together<'a> {
    events: Vec<Envelope<'a, NoticeData<'a>>>,
}

/// The id of a delivery's event. It is the same each time the delivery is sent and different for
/// every other delivery, so a receiver can drop repeats by `source` and `id`.
pub fn id(delivery: &Delivery) -> String {
    format!("{}.{}", delivery.notice.id, delivery.number)
}

/// The event of a delivery.
pub fn encode(delivery: &Delivery) -> Vec<u8> {
    let kind = format!("evenrow.notice.{}", word(delivery));
    written(&envelope(delivery, kind))
}

/// The event of a delivery that only tries the way.
pub fn encode_test(delivery: &Delivery) -> Vec<u8> {
    written(&envelope(delivery, "evenrow.test".to_owned()))
}

/// Several deliveries in one event of the type `evenrow.digest`, each as an event of its own inside;
/// `last` is the newest of them.
pub fn encode_digest(id: String, all: &[Delivery], last: &Delivery) -> Vec<u8> {
    let event = |d| envelope(d, format!("evenrow.notice.{}", word(d)));
    let data = Together {
        events: all.iter().map(event).collect(),
    };
    written(&Envelope {
        specversion: "1.0",
        id,
        source: topic::event_source(&last.notice.plant),
        kind: "evenrow.digest".to_owned(),
        subject: None,
        time: last.at,
        datacontenttype: "application/json",
        data,
    })
}

fn word(delivery: &Delivery) -> &'static str {
    delivery.notice.kind.word()
}

fn envelope(delivery: &Delivery, kind: String) -> Envelope<'_, NoticeData<'_>> {
    let notice = &delivery.notice;
    Envelope {
        specversion: "1.0",
        id: id(delivery),
        source: topic::event_source(&notice.plant),
        kind,
        subject: Some(&notice.bank),
        time: delivery.at,
        datacontenttype: "application/json",
        data: NoticeData::of(notice),
    }
}

fn written(event: &impl Serialize) -> Vec<u8> {
    // Plain structs with text keys always have a JSON form; an empty payload would mean "over".
    serde_json::to_vec(event).unwrap_or_else(|e| format!("{{\"error\":\"{e}\"}}").into_bytes())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::notice::State;
    use crate::outlets::queue::tests::delivery;

    fn json(bytes: &[u8]) -> serde_json::Value {
        serde_json::from_slice(bytes).unwrap()
    }

    #[test]
    fn every_required_attribute_is_there() {
        let json = json(&encode(&delivery(7, "a", State::Unacknowledged)));
        assert_eq!(json["specversion"], "1.0");
        assert_eq!(json["id"], "a.7");
        assert_eq!(json["source"], "/evenrow/Quayside");
        assert_eq!(json["type"], "evenrow.notice.level_apart");
        assert_eq!(json["subject"], "filler 2");
        assert_eq!(json["time"], "1970-01-01T00:00:07Z");
        assert_eq!(json["datacontenttype"], "application/json");
        assert_eq!(json["data"]["id"], "a");
        assert_eq!(json["data"]["state"], "unacknowledged");
        assert_eq!(json["data"]["sources"][0]["source"], "07");
    }

    #[test]
    fn a_test_is_marked_by_its_type() {
        let json = json(&encode_test(&delivery(7, "a", State::Unacknowledged)));
        assert_eq!(json["type"], "evenrow.test");
    }

    #[test]
    fn a_digest_holds_each_event_as_it_would_have_been_by_itself() {
        let all = [
            delivery(7, "a", State::Unacknowledged),
            delivery(9, "b", State::Acknowledged),
        ];
        let digest = json(&encode_digest("x".to_owned(), &all, &all[1]));
        assert_eq!(digest["type"], "evenrow.digest");
        assert_eq!(digest["id"], "x");
        assert_eq!(digest["time"], "1970-01-01T00:00:09Z");
        assert!(digest.get("subject").is_none());
        for (inside, one) in all.iter().enumerate() {
            assert_eq!(digest["data"]["events"][inside], json(&encode(one)));
        }
    }
}
