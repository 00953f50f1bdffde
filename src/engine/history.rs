//! How the past is read: implemented by the store, used by pages and interfaces.

use crate::model::{LineEvent, Time};
use crate::notice::Notice;
use crate::verdict::{Digest, Look};

use super::evidence::Evidence;

/// Why the past could not be read.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("the store could not be read: {0}")]
pub struct HistoryError(pub String);

/// A part of a long list.
#[derive(Clone, Debug, PartialEq)]
pub struct Page<T> {
    /// The items.
    pub items: Vec<T>,
    /// Where the next page starts; `None` at the end.
    pub next: Option<String>,
}

/// Reads what was kept.
pub trait History: Send + Sync {
    /// Short forms of a bank's looks with `from <= at < to`, oldest first, the newest `most` of them.
    ///
    /// # Errors
    /// When the store cannot be read.
    fn digests(
        &self,
        bank: &str,
        from: Time,
        to: Time,
        most: usize,
    ) -> Result<Vec<Digest>, HistoryError>;

    /// A bank's line events with `from <= at < to`, oldest first, the newest `most` of them.
    ///
    /// # Errors
    /// When the store cannot be read.
    fn line_events(
        &self,
        bank: &str,
        from: Time,
        to: Time,
        most: usize,
    ) -> Result<Vec<LineEvent>, HistoryError>;

    /// The newest short form of a look over `span` in each of `parts` equal stretches of the time from
    /// `range.0` until before `range.1`, oldest first; a stretch without one gives none. Reads no more than it gives,
    /// so a picture of a day costs as much as one of an hour.
    ///
    /// # Errors
    /// When the store cannot be read.
    fn digests_thinned(
        &self,
        bank: &str,
        span: usize,
        range: (Time, Time),
        parts: usize,
    ) -> Result<Vec<Digest>, HistoryError>;

    /// The newest look of a bank that was kept whole at or before `at`, one per span.
    ///
    /// # Errors
    /// When the store cannot be read.
    fn looks_at(&self, bank: &str, at: Time) -> Result<Vec<Look>, HistoryError>;

    /// Notices, newest first; `after` is the `next` of the page before.
    ///
    /// # Errors
    /// When the store cannot be read.
    fn notices(&self, after: Option<&str>, most: usize) -> Result<Page<Notice>, HistoryError>;

    /// One notice.
    ///
    /// # Errors
    /// When the store cannot be read.
    fn notice(&self, id: &str) -> Result<Option<Notice>, HistoryError>;

    /// What a notice's call rested on; `None` when there is no such notice, or nothing was kept with it.
    ///
    /// # Errors
    /// When the store cannot be read.
    fn evidence(&self, id: &str) -> Result<Option<Evidence>, HistoryError>;
}
