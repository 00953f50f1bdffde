//! The form `sparkplug`: Sparkplug B 3.0 (Eclipse Sparkplug Specification 3.0.0; ISO/IEC 20237).
//!
//! | part | what it is for |
//! | --- | --- |
//! | [`wire`] | the protobuf messages |
//! | [`session`] | births, aliases, the sequence of each edge node, deaths |
//! | this file | topics, and the metrics of a message as a bank's measurements |
//!
//! What must hold: a value of a birth is what the node last knew and no fresh measurement; nothing
//! without a birth is believed; the messages of a node are read in the order of its sequence.
//! Deliberately absent: sockets and clocks (`now` is an argument), templates and data sets, and the
//! state topic of a primary host: evenrow listens beside whatever host the plant has.

pub mod session;
pub mod wire;

#[cfg(test)]
mod tests;

use std::borrow::Cow;

use crate::model::{Reason, Time, Value};
use crate::settings::SparkplugForm;

use super::number::shown;
use super::{Decoded, Decodings, Fault, source_of_topic};
use wire::{Given, Metric};

pub use session::{Heard, Session, Told};

/// The first level of every topic.
pub const NAMESPACE: &str = "spBv1.0";

/// What a message is.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// The node begins.
    NodeBirth,
    /// A device begins.
    DeviceBirth,
    /// Values of the node.
    NodeData,
    /// Values of a device.
    DeviceData,
    /// The node ends.
    NodeDeath,
    /// A device ends.
    DeviceDeath,
}

/// A topic of an edge node, taken apart (§4.1).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Address<'t> {
    /// The group.
    pub group: &'t str,
    /// What the message is.
    pub kind: Kind,
    /// The edge node.
    pub node: &'t str,
    /// The device.
    pub device: Option<&'t str>,
}

impl<'t> Address<'t> {
    /// Takes a topic apart; `None` for commands, states and what is no topic of Sparkplug B.
    pub fn of(topic: &'t str) -> Option<Self> {
        let mut levels = topic.split('/');
        if levels.next()? != NAMESPACE {
            return None;
        }
        let group = levels.next()?;
        let kind = match levels.next()? {
            "NBIRTH" => Kind::NodeBirth,
            "DBIRTH" => Kind::DeviceBirth,
            "NDATA" => Kind::NodeData,
            "DDATA" => Kind::DeviceData,
            "NDEATH" => Kind::NodeDeath,
            "DDEATH" => Kind::DeviceDeath,
            _ => return None,
        };
        let node = levels.next()?;
        let device = levels.next();
        let of_device = matches!(
            kind,
            Kind::DeviceBirth | Kind::DeviceData | Kind::DeviceDeath
        );
        let whole = levels.next().is_none() && device.is_some() == of_device;
        whole.then_some(Self {
            group,
            kind,
            node,
            device,
        })
    }
}

/// What a message says for a bank with this form; empty when none of its metrics is meant.
pub fn measurements<'a>(
    form: &SparkplugForm,
    heard: &'a Heard,
    topic_source: Option<&'a str>,
) -> Decodings<'a> {
    let mut all = Vec::new();
    let cycle = match form
        .cycle
        .as_deref()
        .map(|name| cycle(heard, name))
        .transpose()
    {
        Ok(cycle) => cycle,
        Err(fault) => {
            let concerned = |m: &&session::Named| form.metric.matches(&m.name).is_some();
            return match heard.metrics.iter().find(concerned) {
                Some(_) => vec![Err(fault)],
                None => all,
            };
        }
    };
    for named in &heard.metrics {
        if let Some(source) = form.metric.matches(&named.name) {
            let source = topic_source.or(source);
            all.push(measurement(
                &named.metric,
                named.datatype,
                source,
                cycle,
                heard.sent,
            ));
        }
    }
    all
}

fn measurement<'a>(
    metric: &Metric,
    datatype: Option<u32>,
    source: Option<&'a str>,
    cycle: Option<i64>,
    sent: Option<Time>,
) -> Result<Decoded<'a>, Fault> {
    let source: Cow<'a, str> = source_of_topic(source)?;
    super::checked_source(&source)?;
    quality(metric)?;
    let own = metric.timestamp.map(time).transpose()?;
    if metric.is_historical == Some(true) && own.is_none() {
        let detail = "a historical value has no time of its own";
        return Err(Fault::new(Reason::BadTime, detail));
    }
    Ok(Decoded {
        source,
        value: value(metric, datatype)?,
        taken: own.or(sent),
        cycle,
    })
}

/// The cycle in the same message, else the last that was told by this device or node.
fn cycle(heard: &Heard, name: &str) -> Result<i64, Fault> {
    let here = heard.metrics.iter().find(|named| *named.name == *name);
    let told = here
        .map(|named| whole(&named.metric, named.datatype))
        .transpose()?;
    let missing = || {
        let detail = format!("the metric {} has not been sent yet", shown(name));
        Fault::new(Reason::FieldMissing, detail)
    };
    told.or_else(|| heard.known.get(name).copied())
        .ok_or_else(missing)
}

/// The quality codes of §6.4.7: only good is believed. Senders of OPC habits refine good within
/// 192 to 255.
fn quality(metric: &Metric) -> Result<(), Fault> {
    let Some(properties) = &metric.properties else {
        return Ok(());
    };
    let mut pairs = properties.keys.iter().zip(&properties.values);
    let code = pairs
        .find(|(key, _)| key.as_str() == "Quality")
        .map(|(_, value)| value.int_value);
    let word = match code {
        None | Some(Some(192..=255)) => return Ok(()),
        Some(Some(500)) => "stale".to_owned(),
        Some(Some(0)) => "bad".to_owned(),
        Some(Some(other)) => format!("of quality {other}"),
        Some(None) => "of unknown quality".to_owned(),
    };
    let detail = format!("the sender calls the value {word}");
    Err(Fault::new(Reason::BadQuality, detail))
}

/// Milliseconds since 1970.
pub(super) fn time(ms: u64) -> Result<Time, Fault> {
    let us = i64::try_from(ms).ok().and_then(|ms| ms.checked_mul(1000));
    us.map(Time::from_us)
        .ok_or_else(|| Fault::new(Reason::BadTime, format!("the time {ms} ms is out of range")))
}

/// A whole number of 64 bits by its type (§6.4.16): the narrow ones in two's complement.
pub(super) fn whole(metric: &Metric, datatype: Option<u32>) -> Result<i64, Fault> {
    let not_whole = || Fault::new(Reason::BadCycle, "the cycle is no whole number");
    let fits = |x: f64| (x.fract() == 0.0 && x.abs() < 9.0e15).then_some(x as i64);
    match metric.value.as_ref().ok_or_else(not_whole)? {
        Given::Int(bits) => Ok(narrow(*bits, datatype)),
        Given::Long(bits) if datatype == Some(4) => Ok(bits.cast_signed()),
        Given::Long(bits) => i64::try_from(*bits).map_err(|_| not_whole()),
        Given::Float(float) => fits(f64::from(*float)).ok_or_else(not_whole),
        Given::Double(double) => fits(*double).ok_or_else(not_whole),
        Given::Boolean(_) | Given::Text(_) => Err(not_whole()),
    }
}

/// Int8, Int16 and Int32 are 1, 2 and 3; some senders fill the upper bits with the sign, some not.
fn narrow(bits: u32, datatype: Option<u32>) -> i64 {
    match datatype {
        Some(1) => i64::from(bits as u8 as i8),
        Some(2) => i64::from(bits as u16 as i16),
        Some(3) => i64::from(bits.cast_signed()),
        _ => i64::from(bits),
    }
}

/// The value. A float is taken as the shortest decimal that is that float: the sender had a
/// decimal once, and 503.1 in single precision is no 503.100006.
fn value(metric: &Metric, datatype: Option<u32>) -> Result<Value, Fault> {
    let not = |reason, what: &str| Err(Fault::new(reason, format!("the value {what}")));
    if metric.is_null == Some(true) {
        return not(Reason::FieldMissing, "is null");
    }
    let text = match &metric.value {
        None => return not(Reason::NotANumber, "is of a kind that is no number"),
        Some(Given::Boolean(flag)) => return not(Reason::NotANumber, &format!("is {flag}")),
        Some(Given::Text(text)) => {
            return not(Reason::NotANumber, &format!("is the text {}", shown(text)));
        }
        Some(Given::Int(bits)) => narrow(*bits, datatype).to_string(),
        Some(Given::Long(bits)) if datatype == Some(4) => bits.cast_signed().to_string(),
        Some(Given::Long(bits)) => bits.to_string(),
        Some(Given::Float(float)) => float.to_string(),
        Some(Given::Double(double)) => double.to_string(),
    };
    Value::parse(&text).map_err(|_| {
        Fault::new(
            Reason::NotFinite,
            format!("the value {text} is not a finite number"),
        )
    })
}
