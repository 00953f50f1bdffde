//! Times as payloads and recordings write them.
//!
//! Whole and fractional epoch times are converted in decimal, so that a millisecond stays one.
//! Digits beyond the microsecond are cut off. Local times without an offset are read only where the
//! configuration says so, and refused in the hours in which they name two moments or none.
//! Deliberately absent: whether a time is plausible.

use jiff::tz::TimeZone;

use crate::model::{Reason, Time, Value};
use crate::settings::TimeForm;

use super::Fault;
use super::number::shown;

/// Numbers below this are seconds in [`TimeForm::Auto`], from there on milliseconds: 1e11 s is the
/// year 5138, 1e11 ms is March 1973.
const FIRST_MS: i128 = 100_000_000_000;

/// A time from text that stands where text belongs (a JSON string).
pub(in crate::intake) fn from_text(text: &str, form: &TimeForm) -> Result<Time, Fault> {
    match form {
        TimeForm::Auto | TimeForm::Rfc3339 => rfc3339(text),
        TimeForm::Local(zone) => local(text, zone),
        TimeForm::EpochSeconds | TimeForm::EpochMilliseconds => Err(bad(format!(
            "the time {} is text, a number since 1970 is configured",
            shown(text)
        ))),
    }
}

/// A time from a number.
pub(in crate::intake) fn from_number(text: &str, form: &TimeForm) -> Result<Time, Fault> {
    let value =
        Value::parse(text).map_err(|error| bad(format!("the time {} {error}", shown(text))))?;
    let us = match form {
        TimeForm::Rfc3339 | TimeForm::Local(_) => {
            let words = format!("the time {} is a number, text is configured", shown(text));
            return Err(bad(words));
        }
        TimeForm::EpochSeconds => scaled(value, 6),
        TimeForm::EpochMilliseconds => scaled(value, 3),
        TimeForm::Auto => match scaled(value, 0) {
            Some(whole) if (-FIRST_MS..FIRST_MS).contains(&i128::from(whole)) => scaled(value, 6),
            _ => scaled(value, 3),
        },
    };
    us.map(Time::from_us)
        .ok_or_else(|| bad(format!("the time {} is out of range", shown(text))))
}

/// A time from a cell of a table, where text and numbers look alike.
pub(in crate::intake) fn from_cell(text: &str, form: &TimeForm) -> Result<Time, Fault> {
    let text = text.trim();
    if text.is_empty() {
        Err(bad("there is no time".to_owned()))
    } else if Value::parse(text).is_ok() {
        from_number(text, form)
    } else {
        from_text(text, form)
    }
}

fn rfc3339(text: &str) -> Result<Time, Fault> {
    let text = text.trim();
    Time::parse_rfc3339(text).map_err(|_| {
        let local = text.parse::<jiff::civil::DateTime>().is_ok();
        let why = if local {
            "has no offset from UTC, write for example 2026-03-01T06:00:00Z or 2026-03-01T07:00:00+01:00"
        } else {
            "cannot be read, write for example 2026-03-01T06:00:00Z"
        };
        bad(format!("the time {} {why}", shown(text)))
    })
}

/// A time by the clocks of a zone.
fn local(text: &str, zone: &TimeZone) -> Result<Time, Fault> {
    let text = text.trim();
    let Ok(by_the_wall) = text.parse::<jiff::civil::DateTime>() else {
        let why = "cannot be read, write for example 2026-03-01T06:00:00";
        return Err(bad(format!("the time {} {why}", shown(text))));
    };
    if Time::parse_rfc3339(text).is_ok() {
        let why = "has an offset from UTC, then leave `time_form` out";
        return Err(bad(format!("the time {} {why}", shown(text))));
    }
    let moment = zone.to_ambiguous_timestamp(by_the_wall).unambiguous();
    moment
        .map(|at| Time::from_us(at.as_microsecond()))
        .map_err(|_| {
            let why = "names two moments or none, because the clocks are changed then";
            bad(format!("the time {} {why}", shown(text)))
        })
}

/// `value * 10^power`, cut to a whole number.
pub(super) fn scaled(value: Value, power: i32) -> Option<i64> {
    match value {
        Value::Decimal {
            coefficient,
            exponent,
        } => {
            let shift = i32::from(exponent) + power;
            let ten = 10_i128.checked_pow(shift.unsigned_abs());
            let coefficient = i128::from(coefficient);
            let whole = match (ten, shift >= 0) {
                (Some(ten), true) => coefficient.checked_mul(ten)?,
                (Some(ten), false) => coefficient.div_euclid(ten),
                (None, true) if coefficient != 0 => return None,
                (None, _) => 0,
            };
            i64::try_from(whole).ok()
        }
        // More digits than a decimal holds: the double is still good to the microsecond
        // for some two hundred years around 1970.
        Value::Float(float) => {
            let scaled = (float * 10_f64.powi(power)).floor();
            // 2^63 as a double; anything at or beyond it does not fit.
            let fits = scaled.abs() < 9_223_372_036_854_775_808.0;
            fits.then_some(scaled as i64)
        }
    }
}

fn bad(detail: String) -> Fault {
    Fault::new(Reason::BadTime, detail)
}
