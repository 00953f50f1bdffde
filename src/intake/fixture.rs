//! Feeds for this room's tests.

use crate::model::BankIx;
use crate::settings::{
    Belief, Feed, Fields, Items, JsonForm, Of, PayloadForm, Pointer, RecordingColumns, SourceAt,
    TimeForm, ToldBy, TopicTemplate,
};

/// A template as written.
pub(super) fn template(text: &str) -> TopicTemplate {
    let levels: Vec<String> = text.split('/').map(str::to_owned).collect();
    TopicTemplate {
        source_level: levels.iter().position(|level| level == "{source}"),
        levels,
    }
}

/// A pointer from the top.
pub(super) fn top(path: &str) -> Pointer {
    Pointer {
        of: Of::Message,
        path: path.to_owned(),
    }
}

/// A pointer from the item.
pub(super) fn inside(path: &str) -> Pointer {
    Pointer {
        of: Of::Item,
        path: path.to_owned(),
    }
}

/// The value at `/v`, nothing else.
pub(super) fn fields() -> Fields<Pointer> {
    Fields {
        value: inside("/v"),
        source: SourceAt::Topic,
        time: None,
        time_form: TimeForm::Auto,
        cycle: None,
        unit: None,
    }
}

/// One measurement in a JSON message.
pub(super) fn json(fields: Fields<Pointer>) -> PayloadForm {
    PayloadForm::Json(JsonForm {
        items: Items::One,
        fields,
    })
}

/// One bank's feed for each template and form.
pub(super) fn feeds<'a>(from: impl IntoIterator<Item = (&'a str, PayloadForm)>) -> Vec<Feed> {
    let feed = |(bank, (text, payload))| Feed {
        bank: BankIx(bank),
        topic: template(text),
        payload,
        belief: Belief::default(),
        recording: RecordingColumns::default(),
        told_by: ToldBy::Message,
    };
    (0..).zip(from).map(feed).collect()
}
