//! The envelope of a notice: CloudEvents 1.0.2 in JSON, structured mode
//! (github.com/cloudevents/spec, `formats/json-format.md`).

use serde::Serialize;

use crate::model::Time;
use crate::notice::{Delivery, NoticeData};

use super::topic;

/// The media type of an event in structured mode.
pub const CONTENT_TYPE: &str = "application/cloudevents+json";

#[derive(Serialize)]
struct Envelope<'a> {
    specversion: &'static str,
    id: String,
    source: String,
    #[serde(rename = "type")]
    kind: String,
    subject: &'a str,
    time: Time,
    datacontenttype: &'static str,
    data: NoticeData<'a>,
}

/// The event of a delivery. Its `id` is the same each time the delivery is sent and different for
/// every other delivery, so a receiver can drop repeats by `source` and `id`.
pub fn encode(delivery: &Delivery) -> Vec<u8> {
    let notice = &delivery.notice;
    let envelope = Envelope {
        specversion: "1.0",
        id: format!("{}.{}", notice.id, delivery.number),
        source: topic::event_source(&notice.plant),
        kind: format!("evenrow.notice.{}", notice.kind.word()),
        subject: &notice.bank,
        time: delivery.at,
        datacontenttype: "application/json",
        data: NoticeData::of(notice),
    };
    // Plain structs with text keys always have a JSON form; an empty payload would mean "over".
    serde_json::to_vec(&envelope).unwrap_or_else(|e| format!("{{\"error\":\"{e}\"}}").into_bytes())
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::notice::State;
    use crate::outlets::queue::tests::delivery;

    #[test]
    fn every_required_attribute_is_there() {
        let json: serde_json::Value =
            serde_json::from_slice(&encode(&delivery(7, "a", State::Unacknowledged))).unwrap();
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
}
