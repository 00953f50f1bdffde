//! What is dropped: turns that are old and contained in every bank's checkpoint, and old looks.
//!
//! Turns after the oldest checkpoint are never dropped, nor notices, their evidence, the outbox.
//! With `keep_days = 0` turns go as soon as every checkpoint holds them, and looks after a day.
//! One call does a bounded share of the work, because commits wait for it.

use crate::model::{Name, Time, US_PER_DAY};

use super::journal::{Retained, parts_of};
use super::keys::{self, Sort};
use super::pack;
use super::recover::{ReadError, held, payload};
use super::shelf::{MOST_OPS, Op, Order, Shelf};

/// Most removals of one call: about a hundredth of a second.
const MOST_REMOVED: usize = 10 * MOST_OPS;

/// Drops some of what need not be kept.
///
/// # Errors
/// When the database does not answer or a record on the way is damaged.
pub(super) fn retain(
    shelf: &dyn Shelf,
    banks: &[Name],
    keep_days: u32,
    now: Time,
) -> Result<Retained, ReadError> {
    let days = |d: u32| now.plus_us(-US_PER_DAY.saturating_mul(i64::from(d)));
    let turns_before = if keep_days == 0 {
        None
    } else {
        Some(days(keep_days))
    };
    let looks_before = days(keep_days.max(1));

    let mut ops = old_turns(shelf, banks, turns_before)?;
    for sort in [Sort::Digest, Sort::Line, Sort::Look] {
        old_of_banks(shelf, sort, looks_before, &mut ops)?;
    }
    let count = ops.len();
    for some in ops.chunks(MOST_OPS) {
        shelf.apply(some.to_vec())?;
    }
    if count == 0 {
        return Ok(Retained::Done(0));
    }
    shelf.sync()?;
    Ok(if count >= MOST_REMOVED {
        Retained::More(count)
    } else {
        Retained::Done(count)
    })
}

/// The oldest turns that every bank holds and that were applied before `before` (any, when `None`).
fn old_turns(
    shelf: &dyn Shelf,
    banks: &[Name],
    before: Option<Time>,
) -> Result<Vec<Op>, ReadError> {
    let mut ops = Vec::new();
    let Some(held) = held(shelf, banks)? else {
        return Ok(ops);
    };
    let to = keys::turn(held.saturating_add(1));
    let mut from = Sort::Turn.from();
    while ops.len() < MOST_REMOVED {
        let page = shelf.page(&from, &to, Order::Rising, MOST_OPS)?;
        let Some((last, _)) = page.last() else {
            break;
        };
        from = [last, &[0][..]].concat();
        for (key, value) in &page {
            if let Some(before) = before {
                let bytes = payload(shelf, key, value)?;
                let at = pack::time_of(&bytes).map_err(|e| ReadError::record(key, &e))?;
                if at >= before {
                    return Ok(ops);
                }
            }
            ops.push(Op::Remove(key.clone()));
            ops.extend(parts_of(key, value));
        }
    }
    Ok(ops)
}

/// The digests, line events or looks of every bank from before `before`.
fn old_of_banks(
    shelf: &dyn Shelf,
    sort: Sort,
    before: Time,
    ops: &mut Vec<Op>,
) -> Result<(), ReadError> {
    let mut from = sort.from();
    while ops.len() < MOST_REMOVED {
        let first = shelf.page(&from, &sort.to(), Order::Rising, 1)?;
        let Some(prefix) = first.first().and_then(|(key, _)| group(sort, key)) else {
            break;
        };
        let to = keys::times_from(&prefix, before);
        let page = shelf.page(&prefix, &to, Order::Rising, MOST_REMOVED - ops.len())?;
        for (key, value) in &page {
            ops.push(Op::Remove(key.clone()));
            ops.extend(parts_of(key, value));
        }
        from = keys::beyond(&prefix);
    }
    Ok(())
}

/// What the keys of one bank (and, for looks, one span) begin with; a time follows.
fn group(sort: Sort, key: &[u8]) -> Option<Vec<u8>> {
    let bank = keys::bank_prefix(key)?;
    let length = if sort == Sort::Look {
        bank.len() + 4
    } else {
        bank.len()
    };
    key.get(..length).map(<[u8]>::to_vec)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_look_is_grouped_by_bank_and_span() {
        let key = keys::look("filler", 40, Time::from_us(9));
        let group = group(Sort::Look, &key).unwrap();
        assert_eq!(group, key[..key.len() - 8]);
        let digest = keys::digest("filler", Time::from_us(9), 40);
        let group = super::group(Sort::Digest, &digest).unwrap();
        assert_eq!(group, digest[..digest.len() - 12]);
    }
}
