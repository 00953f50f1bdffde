//! What was kept of the past, read in the pieces that pages and interface need.
//!
//! Deliberately absent: how it is drawn or written.

use crate::engine::{History, HistoryError};
use crate::model::{Name, Time};
use crate::notice::Notice;

/// Notices read at a time.
const PART: usize = 200;
/// Most notices gone through for one answer; a plant with more than these has other worries.
const MOST: usize = 4000;

/// Notices raised in `from <= raised < to`, newest first, of one bank or of all.
///
/// # Errors
/// When the store cannot be read.
pub fn notices(
    history: &dyn History,
    bank: Option<&str>,
    (from, to): (Time, Time),
) -> Result<Vec<Notice>, HistoryError> {
    let wanted =
        |n: &Notice| (from..to).contains(&n.raised) && bank.is_none_or(|bank| bank == &*n.bank);
    let (mut found, mut seen, mut after) = (Vec::new(), 0, None::<String>);
    while seen < MOST {
        let part = history.notices(after.as_deref(), PART)?;
        seen += part.items.len();
        let over = part.items.last().is_none_or(|n| n.raised < from);
        found.extend(part.items.into_iter().filter(|n| wanted(n)));
        after = part.next;
        if over || after.is_none() {
            break;
        }
    }
    Ok(found)
}

/// Since when a notice's condition is gone; `None` while it holds.
pub fn end(notice: &Notice) -> Option<Time> {
    if notice.state.is_active() {
        return None;
    }
    Some(notice.returned.unwrap_or(notice.changed))
}

/// A notice as it stood at a moment; `None` before it was raised and after it was over and seen.
///
/// Its figures are those last kept: what they were in between is not.
pub fn as_of(notice: &Notice, at: Time) -> Option<Notice> {
    use crate::notice::State;
    if notice.raised > at {
        return None;
    }
    let seen = notice.acknowledged.clone().filter(|a| a.at <= at);
    let gone = end(notice).filter(|end| *end <= at);
    let state = match (&seen, gone) {
        (None, None) => State::Unacknowledged,
        (Some(_), None) => State::Acknowledged,
        (None, Some(_)) => State::ReturnedUnacknowledged,
        (Some(_), Some(_)) => return None,
    };
    Some(Notice {
        state,
        returned: gone,
        acknowledged: seen,
        ..notice.clone()
    })
}

/// Which of these names a notice, and so belongs to its sources.
pub fn names(notice: &Notice, source: &Name) -> bool {
    notice.sources.iter().any(|s| s.source == *source)
}
