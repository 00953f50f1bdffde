//! Turns as payloads. Measurements are packed: names once per record, times, cycles and coefficients
//! as differences in variable-length numbers; a batch needs well under 16 bytes a measurement.
//!
//! A payload begins with the turn's time, so that age is known without reading the rest. Banks are
//! written by name: a bank's place in the configuration may change between two starts, and a
//! measurement of a bank that is gone is left out when read. Nothing is rounded.

use std::collections::{BTreeMap, BTreeSet};

use crate::engine::{Due, Event, Judged, Onward, Turn};
use crate::model::{BankIx, Measurement, Name, SourceIx, Time, Value};

use super::codec::{DecodeError, from_payload, take_payload, to_payload};

/// The event follows as postcard.
const PLAIN: u8 = 0;
/// Packed measurements follow.
const PACKED: u8 = 1;
/// What was due follows: names of banks, then postcard that counts in that list.
const DUE: u8 = 2;

/// Steps of time in which a record may count, in microseconds; the largest that loses nothing is used.
const UNITS_US: [i64; 3] = [1_000_000, 1_000, 1];

/// The measurement carries a time.
const TAKEN: u64 = 1;
/// It carries a cycle.
const CYCLE: u64 = 2;
/// Its value is a double.
const FLOAT: u64 = 4;
/// Its value has the exponent of the source's value before.
const SAME: u64 = 8;
/// Bits of the marks above.
const MARKS: u32 = 4;

/// The payload of a turn; its number is in the key.
///
/// # Errors
/// When a measurement belongs to no bank of the list, or the event cannot be written.
pub(super) fn pack(turn: &Turn, banks: &[Name]) -> Result<Vec<u8>, DecodeError> {
    let mut out = Vec::new();
    put_signed(&mut out, turn.now.us());
    match &turn.event {
        Event::Measurements(all) => {
            out.push(PACKED);
            pack_measurements(&mut out, turn.now, all, banks)?;
        }
        Event::Due(due) => {
            out.push(DUE);
            pack_due(&mut out, due, banks)?;
        }
        other => {
            out.push(PLAIN);
            out.extend(to_payload(other)?);
        }
    }
    Ok(out)
}

/// The turn in a payload.
///
/// # Errors
/// When the payload holds something else.
pub(super) fn unpack(number: u64, payload: &[u8], banks: &[Name]) -> Result<Turn, DecodeError> {
    let mut rest = Reader(payload);
    let now = Time::from_us(rest.signed()?);
    let event = match rest.byte()? {
        PLAIN => from_payload(rest.0)?,
        PACKED => Event::Measurements(unpack_measurements(&mut rest, now, banks)?),
        DUE => Event::Due(unpack_due(&mut rest, banks)?),
        other => return Err(DecodeError::Form(other)),
    };
    Ok(Turn { number, now, event })
}

/// The time in the payload of a turn.
///
/// # Errors
/// When the payload is cut short.
pub(super) fn time_of(payload: &[u8]) -> Result<Time, DecodeError> {
    Reader(payload).signed().map(Time::from_us)
}

/// What the next measurement is written against.
struct Before {
    taken: i64,
    cycle: i64,
}

/// A source within one record.
#[derive(Clone)]
struct Line {
    bank: Option<BankIx>,
    source: Name,
    exponent: Option<i8>,
    coefficient: i64,
}

fn pack_measurements(
    out: &mut Vec<u8>,
    now: Time,
    all: &[Measurement],
    banks: &[Name],
) -> Result<(), DecodeError> {
    let lines = put_names(out, all, banks)?;
    let fits = |unit: &i64| {
        all.iter()
            .all(|m| m.taken.is_none_or(|t| t.us() % unit == 0))
    };
    let unit = UNITS_US.iter().position(fits).unwrap_or(UNITS_US.len() - 1);
    out.push(u8::try_from(unit).unwrap_or(u8::MAX));
    let unit_us = UNITS_US[unit];
    put(out, all.len() as u64);

    let mut before = Before {
        taken: now.us() / unit_us,
        cycle: 0,
    };
    let mut values: Vec<(Option<i8>, i64)> = vec![(None, 0); lines.len()];
    for m in all {
        let line = lines[&(m.bank, &*m.source)];
        put_one(out, m, line, unit_us, &mut before, &mut values[line]);
    }
    Ok(())
}

/// Writes the banks and sources that occur, and says which line of the list each is.
fn put_names<'a>(
    out: &mut Vec<u8>,
    all: &'a [Measurement],
    banks: &[Name],
) -> Result<BTreeMap<(BankIx, &'a str), usize>, DecodeError> {
    let mut lines = BTreeMap::new();
    let mut order = Vec::new();
    let mut used: Vec<BankIx> = Vec::new();
    for m in all {
        lines.entry((m.bank, &*m.source)).or_insert_with(|| {
            order.push((m.bank, &*m.source));
            order.len() - 1
        });
        if !used.contains(&m.bank) {
            used.push(m.bank);
        }
    }
    put_banks(out, &used, banks)?;
    put(out, order.len() as u64);
    for (bank, source) in &order {
        let place = used.iter().position(|b| b == bank).unwrap_or_default();
        put(out, place as u64);
        put_text(out, source);
    }
    Ok(lines)
}

fn put_banks(out: &mut Vec<u8>, used: &[BankIx], banks: &[Name]) -> Result<(), DecodeError> {
    put(out, used.len() as u64);
    for bank in used {
        let name = banks.get(bank.index()).ok_or_else(|| {
            DecodeError::Content(format!("there is no bank at place {}", bank.index()))
        })?;
        put_text(out, name);
    }
    Ok(())
}

/// The banks of [`put_banks`] as they are counted now; `None` for one that is gone.
fn banks_used(rest: &mut Reader<'_>, banks: &[Name]) -> Result<Vec<Option<BankIx>>, DecodeError> {
    let mut used = Vec::new();
    for _ in 0..rest.number()? {
        let name = rest.text()?;
        let place = banks.iter().position(|b| **b == *name);
        used.push(place.and_then(|p| u16::try_from(p).ok()).map(BankIx));
    }
    Ok(used)
}

fn pack_due(out: &mut Vec<u8>, due: &Due, banks: &[Name]) -> Result<(), DecodeError> {
    let Due {
        silent,
        looks,
        onward,
        upkeep,
        conditions,
    } = due;
    let all: BTreeSet<BankIx> = silent
        .iter()
        .map(|(b, _)| b)
        .chain(looks)
        .chain(onward.iter().map(|o| &o.bank))
        .chain(upkeep)
        .chain(conditions.iter().map(|c| &c.bank))
        .copied()
        .collect();
    let used: Vec<BankIx> = all.into_iter().collect();
    put_banks(out, &used, banks)?;
    let place = |bank: BankIx| BankIx(used.partition_point(|b| *b < bank) as u16);
    let silent: Vec<_> = silent.iter().map(|&(b, s)| (place(b), s)).collect();
    let looks: Vec<_> = looks.iter().map(|&b| place(b)).collect();
    let onward: Vec<_> = onward.iter().map(|o| at(o, place(o.bank))).collect();
    let upkeep: Vec<_> = upkeep.iter().map(|&b| place(b)).collect();
    let judged = conditions.iter().map(|c| judged_at(c, place(c.bank)));
    let judged: Vec<_> = judged.collect();
    out.extend(to_payload(&(silent, looks))?);
    // What came later than the first version follows, as far as there is any.
    let later = !upkeep.is_empty() || !judged.is_empty();
    if later || !onward.is_empty() {
        out.extend(to_payload(&onward)?);
    }
    if later {
        out.extend(to_payload(&(upkeep, judged))?);
    }
    Ok(())
}

fn unpack_due(rest: &mut Reader<'_>, banks: &[Name]) -> Result<Due, DecodeError> {
    let used = banks_used(rest, banks)?;
    let (silent, rest): (Vec<(BankIx, SourceIx)>, _) = take_payload(rest.0)?;
    let (looks, rest): (Vec<BankIx>, _) = take_payload(rest)?;
    let (onward, rest): (Vec<Onward>, _) = match rest {
        [] => (Vec::new(), rest),
        rest => take_payload(rest)?,
    };
    let (upkeep, judged): (Vec<BankIx>, Vec<Judged>) = match rest {
        [] => Default::default(),
        rest => from_payload(rest)?,
    };
    let now = |place: BankIx| used.get(place.index()).copied().flatten();
    let silent = silent.into_iter().filter_map(|(b, s)| Some((now(b)?, s)));
    let onward = onward.iter().filter_map(|o| Some(at(o, now(o.bank)?)));
    let judged = judged
        .iter()
        .filter_map(|c| Some(judged_at(c, now(c.bank)?)));
    Ok(Due {
        silent: silent.collect(),
        looks: looks.into_iter().filter_map(now).collect(),
        onward: onward.collect(),
        upkeep: upkeep.into_iter().filter_map(now).collect(),
        conditions: judged.collect(),
    })
}

/// The same with its bank counted otherwise.
fn judged_at(judged: &Judged, bank: BankIx) -> Judged {
    Judged {
        bank,
        ..judged.clone()
    }
}

/// The same with its bank counted otherwise.
fn at(onward: &Onward, bank: BankIx) -> Onward {
    Onward {
        bank,
        ..onward.clone()
    }
}

fn put_one(
    out: &mut Vec<u8>,
    m: &Measurement,
    line: usize,
    unit_us: i64,
    before: &mut Before,
    value: &mut (Option<i8>, i64),
) {
    let mut marks = 0;
    marks |= if m.taken.is_some() { TAKEN } else { 0 };
    marks |= if m.cycle.is_some() { CYCLE } else { 0 };
    marks |= match m.value {
        Value::Float(_) => FLOAT,
        Value::Decimal { exponent, .. } if value.0 == Some(exponent) => SAME,
        Value::Decimal { .. } => 0,
    };
    put(out, (line as u64) << MARKS | marks);
    if let Some(taken) = m.taken {
        let taken = taken.us() / unit_us;
        put_signed(out, taken.wrapping_sub(before.taken));
        before.taken = taken;
    }
    if let Some(cycle) = m.cycle {
        put_signed(out, cycle.wrapping_sub(before.cycle));
        before.cycle = cycle;
    }
    match m.value {
        Value::Float(x) => out.extend_from_slice(&x.to_le_bytes()),
        Value::Decimal {
            coefficient,
            exponent,
        } => {
            if value.0 != Some(exponent) {
                out.extend_from_slice(&exponent.to_le_bytes());
                *value = (Some(exponent), 0);
            }
            put_signed(out, coefficient.wrapping_sub(value.1));
            value.1 = coefficient;
        }
    }
}

fn unpack_measurements(
    rest: &mut Reader<'_>,
    now: Time,
    banks: &[Name],
) -> Result<Vec<Measurement>, DecodeError> {
    let mut lines = names(rest, banks)?;
    let unit_us = *UNITS_US
        .get(usize::from(rest.byte()?))
        .ok_or_else(|| DecodeError::Content("an unknown step of time".to_owned()))?;
    let count = rest.number()?;
    let mut before = Before {
        taken: now.us() / unit_us,
        cycle: 0,
    };
    let mut all = Vec::new();
    for _ in 0..count {
        if let Some(m) = one(rest, &mut lines, unit_us, &mut before)? {
            all.push(m);
        }
    }
    Ok(all)
}

fn names(rest: &mut Reader<'_>, banks: &[Name]) -> Result<Vec<Line>, DecodeError> {
    let used = banks_used(rest, banks)?;
    let mut lines = Vec::new();
    for _ in 0..rest.number()? {
        let place = usize::try_from(rest.number()?).unwrap_or(usize::MAX);
        let bank = used.get(place).copied();
        lines.push(Line {
            bank: bank.ok_or_else(|| DecodeError::Content("an unknown bank".to_owned()))?,
            source: rest.text()?.into(),
            exponent: None,
            coefficient: 0,
        });
    }
    Ok(lines)
}

/// The next measurement; `None` when its bank is not configured any more.
fn one(
    rest: &mut Reader<'_>,
    lines: &mut [Line],
    unit_us: i64,
    before: &mut Before,
) -> Result<Option<Measurement>, DecodeError> {
    let head = rest.number()?;
    let line = usize::try_from(head >> MARKS).unwrap_or(usize::MAX);
    let line = lines
        .get_mut(line)
        .ok_or_else(|| DecodeError::Content("an unknown source".to_owned()))?;
    let taken = if head & TAKEN != 0 {
        before.taken = before.taken.wrapping_add(rest.signed()?);
        Some(Time::from_us(before.taken.wrapping_mul(unit_us)))
    } else {
        None
    };
    let cycle = if head & CYCLE != 0 {
        before.cycle = before.cycle.wrapping_add(rest.signed()?);
        Some(before.cycle)
    } else {
        None
    };
    let value = if head & FLOAT != 0 {
        Value::Float(f64::from_le_bytes(*rest.chunk()?))
    } else {
        if head & SAME == 0 {
            line.exponent = Some(i8::from_le_bytes(*rest.chunk()?));
            line.coefficient = 0;
        }
        line.coefficient = line.coefficient.wrapping_add(rest.signed()?);
        Value::Decimal {
            coefficient: line.coefficient,
            exponent: line.exponent.ok_or(DecodeError::Short)?,
        }
    };
    let source = line.source.clone();
    Ok(line.bank.map(|bank| Measurement {
        bank,
        source,
        value,
        taken,
        cycle,
    }))
}

/// Seven bits a byte, the lowest first; the highest bit says that more follow.
fn put(out: &mut Vec<u8>, mut number: u64) {
    while number >= 0x80 {
        out.push(number as u8 | 0x80);
        number >>= 7;
    }
    out.push(number as u8);
}

/// Small numbers of either sign become small numbers.
fn put_signed(out: &mut Vec<u8>, number: i64) {
    put(out, ((number << 1) ^ (number >> 63)).cast_unsigned());
}

fn put_text(out: &mut Vec<u8>, text: &str) {
    put(out, text.len() as u64);
    out.extend_from_slice(text.as_bytes());
}

/// Reads from the front of what is left.
struct Reader<'a>(&'a [u8]);

impl<'a> Reader<'a> {
    fn take(&mut self, length: usize) -> Result<&'a [u8], DecodeError> {
        let (front, back) = self.0.split_at_checked(length).ok_or(DecodeError::Short)?;
        self.0 = back;
        Ok(front)
    }

    fn chunk<const N: usize>(&mut self) -> Result<&'a [u8; N], DecodeError> {
        let (front, back) = self.0.split_first_chunk().ok_or(DecodeError::Short)?;
        self.0 = back;
        Ok(front)
    }

    fn byte(&mut self) -> Result<u8, DecodeError> {
        self.chunk::<1>().map(|b| b[0])
    }

    fn number(&mut self) -> Result<u64, DecodeError> {
        let mut number = 0;
        for shift in (0..64).step_by(7) {
            let byte = self.byte()?;
            number |= u64::from(byte & 0x7f) << shift;
            if byte & 0x80 == 0 {
                return Ok(number);
            }
        }
        Err(DecodeError::Content("a number without end".to_owned()))
    }

    fn signed(&mut self) -> Result<i64, DecodeError> {
        let number = self.number()?;
        Ok((number >> 1).cast_signed() ^ -((number & 1).cast_signed()))
    }

    fn text(&mut self) -> Result<&'a str, DecodeError> {
        let length = usize::try_from(self.number()?).unwrap_or(usize::MAX);
        let bytes = self.take(length)?;
        std::str::from_utf8(bytes).map_err(|e| DecodeError::Content(e.to_string()))
    }
}

#[cfg(test)]
#[path = "pack_tests.rs"]
mod tests;
