//! Feeds for this room's tests.

use crate::model::BankIx;
use crate::settings::{Feed, JsonPointers, PayloadForm, RecordingColumns, TimeForm, TopicTemplate};

/// A template as written.
pub(super) fn template(text: &str) -> TopicTemplate {
    let levels: Vec<String> = text.split('/').map(str::to_owned).collect();
    TopicTemplate {
        source_level: levels.iter().position(|level| level == "{source}"),
        levels,
    }
}

/// The value at `/v`, nothing else.
pub(super) fn pointers() -> JsonPointers {
    JsonPointers {
        value: "/v".into(),
        source: None,
        time: None,
        time_form: TimeForm::Auto,
        cycle: None,
    }
}

/// One bank's feed for each template and form.
pub(super) fn feeds<'a>(from: impl IntoIterator<Item = (&'a str, PayloadForm)>) -> Vec<Feed> {
    let feed = |(bank, (text, payload))| Feed {
        bank: BankIx(bank),
        topic: template(text),
        payload,
        recording: RecordingColumns::default(),
    };
    (0..).zip(from).map(feed).collect()
}
