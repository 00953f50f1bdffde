//! A payload's form and what is believed of its values, in words.

use crate::settings::{
    Belief, CsvForm, DecimalMark, Fields, Items, JsonForm, Of, OpcUaForm, PayloadForm, Pointer,
    Rebirth, SenMlForm, SourceAt, SparkplugForm, TimeForm, UnitAt, duration_words,
};

/// What a message holds.
pub(super) fn payload(form: &PayloadForm) -> String {
    match form {
        PayloadForm::Number => "a number".to_owned(),
        PayloadForm::Json(form) => json(form),
        PayloadForm::Csv(form) => csv(form),
        PayloadForm::Sparkplug(form) => sparkplug(form),
        PayloadForm::OpcUaJson(form) => opc_ua(form),
        PayloadForm::SenMl(form) => senml(form),
    }
}

/// What is refused although it can be read; `None` when nothing is.
pub(super) fn belief(belief: &Belief, unit: &str) -> Option<String> {
    let Belief {
        sentinels,
        lower,
        upper,
    } = belief;
    let mut parts: Vec<String> = Vec::new();
    if !sentinels.is_empty() {
        let list: Vec<String> = sentinels.iter().map(ToString::to_string).collect();
        parts.push(format!("{} as sentinels", list.join(", ")));
    }
    if let Some(lower) = lower {
        parts.push(format!("below {lower} {unit}"));
    }
    if let Some(upper) = upper {
        parts.push(format!("above {upper} {unit}"));
    }
    (!parts.is_empty()).then(|| parts.join("; "))
}

fn json(form: &JsonForm) -> String {
    let JsonForm { items, fields } = form;
    let of = |pointer: &Pointer| match (items, pointer.of) {
        (Items::One, _) | (_, Of::Message) => format!("at \"{}\"", pointer.path),
        (_, Of::Item) => format!("at \"{}\" of each item", pointer.path),
    };
    let head = match items {
        Items::One => "JSON".to_owned(),
        Items::List(at) => format!("JSON with a list at \"{at}\""),
        Items::BySource(at) => format!("JSON with an object at \"{at}\" that is named by sources"),
    };
    format!("{head}, {}", parts(fields, of))
}

fn csv(form: &CsvForm) -> String {
    let CsvForm {
        fields,
        header,
        separator,
        decimal,
    } = form;
    let of = |column: &usize| match header.get(*column) {
        Some(word) => format!("in column {} ({word})", column + 1),
        None => format!("in column {}", column + 1),
    };
    let mark = match decimal {
        DecimalMark::Point => "decimal point",
        DecimalMark::Comma => "decimal comma",
    };
    let separator = char::from(*separator).escape_default();
    format!(
        "lines parted by {separator} with {mark}, {}",
        parts(fields, of)
    )
}

fn parts<A>(fields: &Fields<A>, of: impl Fn(&A) -> String) -> String {
    let Fields {
        value,
        source,
        time,
        time_form,
        cycle,
        unit,
    } = fields;
    let mut text = format!("value {}", of(value));
    match source {
        SourceAt::Topic => {}
        SourceAt::Member => text.push_str(", source by the member's name"),
        SourceAt::At(at) => text.push_str(&format!(", source {}", of(at))),
        SourceAt::Counted { counter, turn } => {
            let count = turn.sources().count();
            let first = turn.sources().next().map_or("", AsRef::as_ref);
            text.push_str(&format!(
                ", source and cycle from the counter {} modulo {count}, 0 is {first}",
                of(counter)
            ));
        }
    }
    if let Some(at) = time {
        text.push_str(&format!(", time {}", of(at)));
        if let TimeForm::Local(zone) = time_form {
            let zone = zone.iana_name().unwrap_or("the plant's zone");
            text.push_str(&format!(" by the clocks of {zone}"));
        }
    }
    if let Some(at) = cycle {
        text.push_str(&format!(", cycle {}", of(at)));
    }
    if let Some(UnitAt { at, wanted }) = unit {
        text.push_str(&format!(", unit {} must be \"{wanted}\"", of(at)));
    }
    text
}

fn sparkplug(form: &SparkplugForm) -> String {
    let SparkplugForm {
        metric,
        cycle,
        reorder_us,
        rebirth,
    } = form;
    let asks = match rebirth {
        Rebirth::Ask => "then the node is asked for its birth",
        Rebirth::Wait => "then its next birth is waited for",
    };
    format!(
        "Sparkplug B, metric \"{}\"{}; a message that is missing is waited for {}, {asks}",
        metric.written(),
        named("cycle", cycle.as_deref()),
        duration_words(*reorder_us)
    )
}

fn opc_ua(form: &OpcUaForm) -> String {
    let OpcUaForm {
        field,
        source,
        cycle,
        writer,
    } = form;
    format!(
        "OPC UA PubSub JSON, field \"{}\"{}{}{}",
        field.written(),
        named("source", source.as_deref()),
        named("cycle", cycle.as_deref()),
        named("writer", writer.as_deref())
    )
}

fn senml(form: &SenMlForm) -> String {
    let SenMlForm { name, cycle, unit } = form;
    format!(
        "SenML, record \"{}\"{}, unit \"{unit}\" where one is told",
        name.written(),
        named("cycle", cycle.as_deref())
    )
}

fn named(what: &str, name: Option<&str>) -> String {
    name.map_or_else(String::new, |name| format!(", {what} \"{name}\""))
}
