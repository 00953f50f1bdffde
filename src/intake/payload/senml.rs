//! The form `senml`: sensor measurement lists in JSON (RFC 8428).
//!
//! A pack is resolved as §4.6 says: base name, base time, base unit and base value of a record hold for
//! it and those after it. Base and value are added in decimal. A time below 2^28 seconds is so long
//! from now (§4.5.3). What must hold: a label that must be understood and is not (§4.4), or a newer version than
//! ours, refuses the whole pack. Deliberately absent: sums (`s`), and CBOR and EXI, the other encodings.

use std::borrow::Cow;

use serde_json::value::RawValue;

use crate::model::{Reason, Time, Value};
use crate::settings::SenMlForm;

use super::number::shown;
use super::{Decoded, Decodings, Fault, json, source_of_topic, times};

/// The version that RFC 8428 defines (§4.1).
const VERSION: i64 = 10;

/// Times below 2^28 s are relative to now (§4.5.3), in microseconds.
const FIRST_ABSOLUTE_US: i64 = (1 << 28) * crate::model::US_PER_S;

/// Labels without a meaning here that need not be understood for the value: sums, update time, and
/// values of other types.
const OTHER_VALUES: [&str; 3] = ["vs", "vb", "vd"];

/// Decodes a pack.
pub(super) fn decode<'a>(
    form: &SenMlForm,
    text: &str,
    topic_source: Option<&'a str>,
    now: Time,
) -> Result<Decodings<'a>, Fault> {
    let document = json::document(text)?;
    if !json::is_list(document) {
        return Err(Fault::new(Reason::Malformed, "a SenML pack is a list"));
    }
    let mut base = Base::default();
    let mut all = Vec::new();
    let mut names = Vec::new();
    for element in json::elements(document)? {
        if !json::is_object(element) {
            return Err(Fault::new(Reason::Malformed, "a SenML record is an object"));
        }
        let record = Record::read(element, &mut base)?;
        let name = format!("{}{}", base.name, record.name);
        if form.cycle.as_ref() == Some(&name) {
            base.cycle = Some(record.cycle()?);
        } else if let Some(named) = form.name.matches(&name) {
            all.push(record.measurement(form, &base, topic_source.or(named), now));
        } else if record.has_value && names.len() < 3 {
            names.push(shown(&name));
        }
    }
    if all.is_empty() {
        let detail = format!(
            "no record is called \"{}\"; there are {}",
            form.name.written(),
            if names.is_empty() {
                "none".to_owned()
            } else {
                names.join(", ")
            }
        );
        return Err(Fault::new(Reason::FieldMissing, detail));
    }
    Ok(all)
}

/// What holds for a record and those after it.
#[derive(Default)]
struct Base<'p> {
    name: Cow<'p, str>,
    time: Option<Value>,
    unit: Option<Cow<'p, str>>,
    value: Option<Value>,
    /// The newest record with the cycle; not of the standard.
    cycle: Option<i64>,
}

/// A record, its base fields taken out.
#[derive(Default)]
struct Record<'p> {
    name: Cow<'p, str>,
    time: Option<Value>,
    unit: Option<Cow<'p, str>>,
    value: Option<&'p RawValue>,
    has_value: bool,
}

impl<'p> Record<'p> {
    fn read(element: &'p RawValue, base: &mut Base<'p>) -> Result<Self, Fault> {
        let mut record = Self::default();
        for (label, raw) in json::members(element)? {
            match label.as_ref() {
                "bver" => version(raw)?,
                "bn" => base.name = text("bn", raw)?,
                "bt" => base.time = Some(number("bt", raw)?),
                "bu" => base.unit = Some(text("bu", raw)?),
                "bv" => base.value = Some(number("bv", raw)?),
                "n" => record.name = text("n", raw)?,
                "t" => record.time = Some(number("t", raw)?),
                "u" => record.unit = Some(text("u", raw)?),
                "v" => record.value = Some(raw),
                other if other.ends_with('_') => {
                    let detail =
                        format!("the label {} must be understood and is not", shown(other));
                    return Err(Fault::new(Reason::Malformed, detail));
                }
                other => record.has_value |= OTHER_VALUES.contains(&other),
            }
        }
        record.has_value |= record.value.is_some();
        Ok(record)
    }

    fn cycle(&self) -> Result<i64, Fault> {
        let raw = self.value.ok_or_else(|| {
            Fault::new(Reason::BadCycle, "the record with the cycle has no number")
        })?;
        json::cycle(raw)
    }

    fn measurement<'a>(
        &self,
        form: &SenMlForm,
        base: &Base<'_>,
        source: Option<&str>,
        now: Time,
    ) -> Result<Decoded<'a>, Fault> {
        let source = source_of_topic(source)?.into_owned();
        if let Some(unit) = self.unit.as_ref().or(base.unit.as_ref()) {
            super::same_unit(unit, &form.unit)?;
        }
        let Some(raw) = self.value else {
            let detail = format!("the record of source {} has no number", shown(&source));
            return Err(Fault::new(Reason::NotANumber, detail));
        };
        if form.cycle.is_some() && base.cycle.is_none() {
            let detail = "no record with the cycle stands before this one";
            return Err(Fault::new(Reason::FieldMissing, detail));
        }
        let value = json::value(raw)?;
        Ok(Decoded {
            source: Cow::Owned(source),
            value: base.value.map_or(Ok(value), |base| sum(base, value))?,
            taken: taken(base.time, self.time, now)?,
            cycle: base.cycle,
        })
    }
}

fn version(raw: &RawValue) -> Result<(), Fault> {
    match json::cycle(raw) {
        Ok(version) if version <= VERSION => Ok(()),
        _ => {
            let detail = format!(
                "the pack is of SenML version {}, only {VERSION} is known",
                shown(raw.get())
            );
            Err(Fault::new(Reason::Malformed, detail))
        }
    }
}

fn text<'p>(label: &str, raw: &'p RawValue) -> Result<Cow<'p, str>, Fault> {
    json::text(raw).ok_or_else(|| {
        let detail = format!("`{label}` is {}, not text", shown(raw.get()));
        Fault::new(Reason::Malformed, detail)
    })
}

fn number(label: &str, raw: &RawValue) -> Result<Value, Fault> {
    let parsed = json::digits(raw).and_then(|digits| Value::parse(digits).ok());
    parsed.ok_or_else(|| {
        let detail = format!("`{label}` is {}, not a number", shown(raw.get()));
        Fault::new(Reason::Malformed, detail)
    })
}

/// Base time and time added, in the resolved meaning of §4.5.3 and §4.6; `None` when there is
/// neither, which stands for now and is left to the time of receipt.
fn taken(base: Option<Value>, own: Option<Value>, now: Time) -> Result<Option<Time>, Fault> {
    let at = match (base, own) {
        (None, None) => return Ok(None),
        (Some(one), None) | (None, Some(one)) => one,
        (Some(base), Some(own)) => sum(base, own)?,
    };
    let us = times::scaled(at, 6)
        .ok_or_else(|| Fault::new(Reason::BadTime, format!("the time {at} s is out of range")))?;
    Ok(Some(if us < FIRST_ABSOLUTE_US {
        now.plus_us(us)
    } else {
        Time::from_us(us)
    }))
}

/// `a + b`, in decimal where both are and their sum has at most 18 digits.
fn sum(a: Value, b: Value) -> Result<Value, Fault> {
    exact_sum(a, b).map_or_else(
        || {
            Value::from_f64(a.to_f64() + b.to_f64())
                .map_err(|error| Fault::new(Reason::NotFinite, format!("{a} + {b} {error}")))
        },
        Ok,
    )
}

fn exact_sum(a: Value, b: Value) -> Option<Value> {
    let (
        Value::Decimal {
            coefficient: ca,
            exponent: ea,
        },
        Value::Decimal {
            coefficient: cb,
            exponent: eb,
        },
    ) = (a, b)
    else {
        return None;
    };
    let least = ea.min(eb);
    let up = |c: i64, e: i8| {
        let shift = u32::from(i16::from(e).abs_diff(i16::from(least)));
        i128::from(c).checked_mul(10_i128.checked_pow(shift)?)
    };
    let total = up(ca, ea)?.checked_add(up(cb, eb)?)?;
    let coefficient = i64::try_from(total).ok()?;
    // As many digits as a value keeps exactly.
    (coefficient.unsigned_abs() < 1_000_000_000_000_000_000).then_some(Value::Decimal {
        coefficient,
        exponent: least,
    })
}
