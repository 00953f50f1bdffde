//! The past, read for pages and interfaces.

use std::sync::Arc;

use serde::de::DeserializeOwned;

use crate::engine::{Evidence, History, HistoryError, Page};
use crate::model::{LineEvent, Time};
use crate::notice::Notice;
use crate::verdict::{Digest, Look};

use super::codec::from_payload;
use super::keys::{self, Sort};
use super::recover::{ReadError, payload};
use super::shelf::{Order, Shelf};

/// Looks of one moment, one per span, are among this many records before the end of a stretch. A bank
/// has a handful of spans; one that is seldom judged over `span` is sought no further back.
const NEAREST: usize = 24;

/// Reads a shelf.
pub(super) struct Past(pub(super) Arc<dyn Shelf>);

impl Past {
    fn record<T: DeserializeOwned>(&self, key: &[u8], value: &[u8]) -> Result<T, ReadError> {
        let bytes = payload(&*self.0, key, value)?;
        from_payload(&bytes).map_err(|e| ReadError::record(key, &e))
    }

    fn get<T: DeserializeOwned>(&self, key: &[u8]) -> Result<Option<T>, ReadError> {
        let value = self.0.get(key)?;
        value.map(|value| self.record(key, &value)).transpose()
    }

    /// A bank's records of a sort with `from <= at < to`, oldest first, the newest `most` of them.
    fn of_times<T: DeserializeOwned>(
        &self,
        sort: Sort,
        bank: &str,
        (from, to): (Time, Time),
        most: usize,
    ) -> Result<Vec<T>, ReadError> {
        let prefix = keys::of_bank(sort, bank);
        let from = keys::times_from(&prefix, from);
        let to = keys::times_from(&prefix, to);
        let page = self.0.page(&from, &to, Order::Falling, most)?;
        let newest_last = page.iter().rev();
        newest_last.map(|(k, v)| self.record(k, v)).collect()
    }

    fn newest_per_span(&self, bank: &str, at: Time) -> Result<Vec<Look>, ReadError> {
        let prefix = keys::of_bank(Sort::Look, bank);
        let end = keys::beyond(&prefix);
        let mut looks = Vec::new();
        let mut from = prefix.clone();
        loop {
            let next = self.0.page(&from, &end, Order::Rising, 1)?;
            let Some(span) = next.first().and_then(|(key, _)| keys::span_of(key)) else {
                return Ok(looks);
            };
            let first = keys::looks_from(&prefix, span, Time::from_us(i64::MIN));
            let to = keys::looks_from(&prefix, span, at.plus_us(1));
            if let Some((key, value)) = self.0.page(&first, &to, Order::Falling, 1)?.first() {
                looks.push(self.record(key, value)?);
            }
            let Some(next) = span.checked_add(1) else {
                return Ok(looks);
            };
            from = keys::looks_from(&prefix, next, Time::from_us(i64::MIN));
        }
    }

    /// The newest digest over `span` with `from <= at < to`.
    fn newest_over(
        &self,
        prefix: &[u8],
        span: usize,
        (from, to): (Time, Time),
    ) -> Result<Option<Digest>, ReadError> {
        let from = keys::times_from(prefix, from);
        let to = keys::times_from(prefix, to);
        let some = self.0.page(&from, &to, Order::Falling, NEAREST)?;
        let mut those = some.iter();
        let found = those.find(|(key, _)| keys::digest_span_of(key) == Some(span));
        found
            .map(|(key, value)| self.record(key, value))
            .transpose()
    }

    fn page_of_notices(&self, after: Option<&str>, most: usize) -> Result<Page<Notice>, ReadError> {
        let to = match after {
            None => Some(Sort::Raised.to()),
            Some(id) => {
                let notice: Option<Notice> = self.get(&keys::notice(id))?;
                notice.map(|n| keys::raised(n.raised, id))
            }
        };
        let Some(to) = to else {
            return Ok(Page {
                items: Vec::new(),
                next: None,
            });
        };
        let from = Sort::Raised.from();
        let entries = self
            .0
            .page(&from, &to, Order::Falling, most.saturating_add(1))?;
        let mut items = Vec::new();
        for (key, _) in entries.iter().take(most) {
            let id = keys::id_of(key).unwrap_or_default();
            items.extend(self.get::<Notice>(&keys::notice(id))?);
        }
        let next = match items.last() {
            Some(last) if entries.len() > most => Some(last.id.to_string()),
            _ => None,
        };
        Ok(Page { items, next })
    }
}

fn wrong(e: ReadError) -> HistoryError {
    HistoryError(match e {
        ReadError::Shelf(why) => why,
        other => other.to_string(),
    })
}

impl History for Past {
    fn digests(
        &self,
        bank: &str,
        from: Time,
        to: Time,
        most: usize,
    ) -> Result<Vec<Digest>, HistoryError> {
        self.of_times(Sort::Digest, bank, (from, to), most)
            .map_err(wrong)
    }

    fn line_events(
        &self,
        bank: &str,
        from: Time,
        to: Time,
        most: usize,
    ) -> Result<Vec<LineEvent>, HistoryError> {
        self.of_times(Sort::Line, bank, (from, to), most)
            .map_err(wrong)
    }

    fn digests_thinned(
        &self,
        bank: &str,
        span: usize,
        (from, to): (Time, Time),
        parts: usize,
    ) -> Result<Vec<Digest>, HistoryError> {
        let prefix = keys::of_bank(Sort::Digest, bank);
        let length = to.us_since(from).max(0) as f64;
        let edge = |part: usize| {
            let share = part as f64 / parts.max(1) as f64;
            from.plus_us((length * share) as i64)
        };
        let parts = (0..parts).map(|part| (edge(part), edge(part + 1)));
        let found = parts.filter_map(|part| self.newest_over(&prefix, span, part).transpose());
        found.map(|digest| digest.map_err(wrong)).collect()
    }

    fn looks_at(&self, bank: &str, at: Time) -> Result<Vec<Look>, HistoryError> {
        self.newest_per_span(bank, at).map_err(wrong)
    }

    fn notices(&self, after: Option<&str>, most: usize) -> Result<Page<Notice>, HistoryError> {
        self.page_of_notices(after, most).map_err(wrong)
    }

    fn notice(&self, id: &str) -> Result<Option<Notice>, HistoryError> {
        self.get(&keys::notice(id)).map_err(wrong)
    }

    fn evidence(&self, id: &str) -> Result<Option<Evidence>, HistoryError> {
        self.get(&keys::evidence(id)).map_err(wrong)
    }
}
