//! The forms a payload may have, as used: where value, source, time, cycle and unit stand in it, and
//! what of it is believed. Every value is checked and complete.

use crate::model::{Name, Value};

/// The form of a payload.
#[derive(Clone, Debug, PartialEq)]
pub enum PayloadForm {
    /// The whole payload is one decimal number.
    Number,
    /// A JSON document.
    Json(JsonForm),
    /// Lines of separated values.
    Csv(CsvForm),
    /// Sparkplug B 3.0: births, data and deaths of edge nodes and devices.
    Sparkplug(SparkplugForm),
    /// OPC UA PubSub in JSON (OPC 10000-14).
    OpcUaJson(OpcUaForm),
    /// Sensor measurement lists in JSON (RFC 8428).
    SenMl(SenMlForm),
}

/// Where the parts of a measurement stand; `A` is an address within the payload.
#[derive(Clone, Debug, PartialEq)]
pub struct Fields<A> {
    /// The value.
    pub value: A,
    /// The source.
    pub source: SourceAt<A>,
    /// The time taken.
    pub time: Option<A>,
    /// How that is written.
    pub time_form: TimeForm,
    /// The cycle.
    pub cycle: Option<A>,
    /// The unit, where the payload carries it, and how it must be written there.
    pub unit: Option<UnitAt<A>>,
}

/// Where the source is named.
#[derive(Clone, Debug, PartialEq)]
pub enum SourceAt<A> {
    /// By a level of the topic.
    Topic,
    /// By the name of the member that holds the item.
    Member,
    /// In the payload.
    At(A),
    /// Nowhere; it follows from a number that counts the pieces as they pass.
    Counted {
        /// The number.
        counter: A,
        /// Who comes after whom.
        turn: Turn,
    },
}

/// The unit in a payload.
#[derive(Clone, Debug, PartialEq)]
pub struct UnitAt<A> {
    /// Where it stands.
    pub at: A,
    /// What it must say.
    pub wanted: String,
}

/// The sources of a machine that delivers in turn: piece `n` comes from source `n` modulo their
/// number, in the cycle `n` divided by it.
#[derive(Clone, Debug, PartialEq)]
pub struct Turn {
    sources: Vec<Name>,
    at_zero: usize,
}

impl Turn {
    /// The sources in the order of the turn; `at_zero` is the place of the one that piece 0 comes
    /// from. `None` without sources or when the place is none of theirs.
    pub fn new(sources: Vec<Name>, at_zero: usize) -> Option<Self> {
        (at_zero < sources.len()).then_some(Self { sources, at_zero })
    }

    /// The source and cycle of a piece.
    pub fn of(&self, piece: i64) -> (&Name, i64) {
        // There are at most some hundred sources.
        let count = i64::try_from(self.sources.len()).unwrap_or(i64::MAX);
        let steps = usize::try_from(piece.rem_euclid(count)).unwrap_or_default();
        let place = (self.at_zero + steps) % self.sources.len();
        (&self.sources[place], piece.div_euclid(count))
    }

    /// The sources, from the one that piece 0 comes from.
    pub fn sources(&self) -> impl Iterator<Item = &Name> {
        let (before, from) = self.sources.split_at(self.at_zero);
        from.iter().chain(before)
    }
}

/// A JSON document.
#[derive(Clone, Debug, PartialEq)]
pub struct JsonForm {
    /// How many measurements there are in one message, and where.
    pub items: Items,
    /// Where things stand.
    pub fields: Fields<Pointer>,
}

/// The measurements in one JSON message.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Items {
    /// The message is one.
    One,
    /// Each element of the list at this pointer is one.
    List(String),
    /// Each member of the object at this pointer is one, named by its source.
    BySource(String),
}

/// A pointer of RFC 6901.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Pointer {
    /// From where it leads.
    pub of: Of,
    /// The pointer.
    pub path: String,
}

/// From where a pointer leads.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Of {
    /// From the top of the message.
    Message,
    /// From the item that is one measurement.
    Item,
}

/// How a time is written.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum TimeForm {
    /// RFC 3339 text, or a number: seconds below 1e11, milliseconds from there on.
    Auto,
    /// RFC 3339 text with offset.
    Rfc3339,
    /// Seconds since the Unix epoch, fractions allowed.
    EpochSeconds,
    /// Milliseconds since the Unix epoch.
    EpochMilliseconds,
    /// Text without offset, by the clocks of this zone.
    Local(jiff::tz::TimeZone),
}

/// Lines of separated values; addresses are columns, counted from 0.
#[derive(Clone, Debug, PartialEq)]
pub struct CsvForm {
    /// Where things stand.
    pub fields: Fields<usize>,
    /// The words of the columns. A first line that consists of them is no measurement.
    pub header: Vec<String>,
    /// What stands between two columns; one byte of ASCII.
    pub separator: u8,
    /// What stands between the whole and the part of a number.
    pub decimal: DecimalMark,
}

/// What stands between the whole and the part of a number.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum DecimalMark {
    /// `503.1`
    Point,
    /// `503,1`
    Comma,
}

/// Sparkplug B.
#[derive(Clone, Debug, PartialEq)]
pub struct SparkplugForm {
    /// The metric with the value.
    pub metric: NameTemplate,
    /// The metric with the cycle.
    pub cycle: Option<String>,
    /// How long a message may wait for one that was sent before it, in microseconds.
    pub reorder_us: i64,
    /// Whether a node is asked for its birth when something is missing.
    pub rebirth: Rebirth,
}

/// Whether a Sparkplug node is asked for its birth when something is missing.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Rebirth {
    /// It is asked, with a command on its topic.
    Ask,
    /// Nothing is published; what cannot be understood is refused until the node is born again.
    Wait,
}

/// A name in which `{source}` stands for the source, or which is one name for all.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct NameTemplate {
    /// What stands before the source, or the whole name.
    pub before: String,
    /// What stands after the source; `None` when the name does not hold one.
    pub after: Option<String>,
}

impl NameTemplate {
    /// A name as written, with at most one `{source}`; `None` when there are more.
    pub fn new(written: &str) -> Option<Self> {
        let mut parts = written.split("{source}");
        let before = parts.next()?.to_owned();
        let after = parts.next().map(str::to_owned);
        parts.next().is_none().then_some(Self { before, after })
    }

    /// Whether the name is meant, and the source that it names.
    pub fn matches<'n>(&self, name: &'n str) -> Option<Option<&'n str>> {
        let rest = name.strip_prefix(self.before.as_str())?;
        match &self.after {
            None => rest.is_empty().then_some(None),
            Some(after) => {
                let source = rest.strip_suffix(after.as_str())?;
                (!source.is_empty()).then_some(Some(source))
            }
        }
    }

    /// As it was written.
    pub fn written(&self) -> String {
        match &self.after {
            Some(after) => format!("{}{{source}}{after}", self.before),
            None => self.before.clone(),
        }
    }
}

/// OPC UA PubSub in JSON.
#[derive(Clone, Debug, PartialEq)]
pub struct OpcUaForm {
    /// The field with the value.
    pub field: NameTemplate,
    /// The field with the source, where neither the topic nor the field's name has it.
    pub source: Option<String>,
    /// The field with the cycle.
    pub cycle: Option<String>,
    /// The name of the writer whose messages are meant; without it every writer's are.
    pub writer: Option<String>,
}

/// Sensor measurement lists.
#[derive(Clone, Debug, PartialEq)]
pub struct SenMlForm {
    /// The resolved name of the record with the value.
    pub name: NameTemplate,
    /// The resolved name of the record with the cycle.
    pub cycle: Option<String>,
    /// What the unit of a record must say, where the record has one.
    pub unit: String,
}

/// What is believed of a value that can be read.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Belief {
    /// Values by which an instrument says that it has none.
    pub sentinels: Vec<Value>,
    /// A lower value cannot be true.
    pub lower: Option<Value>,
    /// A higher value cannot be true.
    pub upper: Option<Value>,
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn pieces_come_from_the_sources_in_turn() {
        let names = |list: &[&str]| list.iter().map(|n| Name::from(*n)).collect::<Vec<_>>();
        let turn = Turn::new(names(&["a", "b", "c"]), 1).unwrap();
        for (piece, source, cycle) in [
            (0, "b", 0),
            (1, "c", 0),
            (2, "a", 0),
            (3, "b", 1),
            (-1, "a", -1),
            (i64::MAX, "c", i64::MAX / 3),
            (i64::MIN, "c", i64::MIN / 3 - 1),
        ] {
            let (got, of) = turn.of(piece);
            assert_eq!((got.as_ref(), of), (source, cycle), "{piece}");
        }
        assert_eq!(
            turn.sources().map(AsRef::as_ref).collect::<Vec<&str>>(),
            ["b", "c", "a"]
        );
        assert_eq!(Turn::new(Vec::new(), 0), None);
        assert_eq!(Turn::new(names(&["a"]), 1), None);
    }

    #[test]
    fn a_template_names_the_source_or_is_the_name() {
        for (template, name, found) in [
            ("Head {source}/Net", "Head 07/Net", Some(Some("07"))),
            ("Head {source}/Net", "Head /Net", None),
            ("Head {source}/Net", "Head 07/Gross", None),
            ("{source}", "07", Some(Some("07"))),
            ("a{source}a", "a", None),
            ("a{source}a", "aa", None),
            ("a{source}a", "axa", Some(Some("x"))),
            ("Net", "Net", Some(None)),
            ("Net", "Nett", None),
        ] {
            let template = NameTemplate::new(template).unwrap();
            assert_eq!(template.matches(name), found, "{template:?} {name}");
            assert_eq!(NameTemplate::new(&template.written()), Some(template));
        }
        assert_eq!(NameTemplate::new("{source}{source}"), None);
    }
}
