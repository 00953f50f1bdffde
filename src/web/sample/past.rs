//! The past of the sample plant.

use std::collections::BTreeMap;
use std::sync::Arc;

use crate::engine::{BankView, Evidence, History, HistoryError, Page, Snapshot};
use crate::model::{LineEvent, Name, Time, US_PER_S};
use crate::notice::Notice;
use crate::verdict::{Digest, Look};

use super::looks::look;
use super::notices::past_notices;
use super::{Story, moment};

/// The past of the sample: looks of the last six hours, and two notices of the first bank.
pub struct SampleHistory {
    snapshot: Snapshot,
}

impl SampleHistory {
    /// Of this plant.
    pub fn new(snapshot: Snapshot) -> Self {
        Self { snapshot }
    }

    fn stories(&self) -> Vec<(Arc<BankView>, Story)> {
        let stories = [
            Story::Level(6, -1.62, 14),
            Story::Even,
            Story::Spread(10, 2.9),
            Story::Silent(4),
            Story::Young(6),
            Story::Level(77, 2.1, 50),
            Story::Young(0),
            Story::Even,
            Story::Even,
            Story::Spread(3, 2.2),
            Story::Even,
            Story::Level(1, 1.9, 200),
        ];
        self.snapshot.banks.iter().cloned().zip(stories).collect()
    }
}

impl History for SampleHistory {
    fn digests(
        &self,
        bank: &str,
        from: Time,
        to: Time,
        most: usize,
    ) -> Result<Vec<Digest>, HistoryError> {
        let stories = self.stories();
        let Some((view, story)) = stories.into_iter().find(|(v, _)| &*v.bank.name == bank) else {
            return Ok(Vec::new());
        };
        if matches!(story, Story::Young(_)) {
            return Ok(Vec::new());
        }
        let names: Vec<Name> = view.sources.iter().map(|s| s.name.clone()).collect();
        let mut all = Vec::new();
        let start = moment().plus_us(-6 * 3600 * US_PER_S);
        for step in 0..(6 * 120) {
            let at = start.plus_us(step * 30 * US_PER_S + 18 * US_PER_S);
            // The line stood still for a while.
            if (300..330).contains(&step) || at < from || at >= to {
                continue;
            }
            for span in &view.bank.spans {
                all.push(look(&view.bank, &names, story, *span, at, 9).digest());
            }
        }
        let skip = all.len().saturating_sub(most);
        Ok(all.split_off(skip))
    }

    fn line_events(
        &self,
        bank: &str,
        from: Time,
        to: Time,
        most: usize,
    ) -> Result<Vec<LineEvent>, HistoryError> {
        let found = self.snapshot.banks.iter().find(|b| &*b.bank.name == bank);
        let events = found.into_iter().flat_map(|b| &b.line_events);
        let in_range = events.filter(|e| (from..to).contains(&e.at)).cloned();
        let mut all: Vec<LineEvent> = in_range.collect();
        let skip = all.len().saturating_sub(most);
        Ok(all.split_off(skip))
    }

    fn digests_thinned(
        &self,
        bank: &str,
        span: usize,
        (from, to): (Time, Time),
        parts: usize,
    ) -> Result<Vec<Digest>, HistoryError> {
        let step = to.us_since(from) / i64::try_from(parts.max(1)).unwrap_or(1);
        let all = self.digests(bank, from, to, usize::MAX)?;
        let mut newest: BTreeMap<i64, Digest> = BTreeMap::new();
        for digest in all.into_iter().filter(|d| d.span == span) {
            newest.insert(digest.at.us_since(from) / step.max(1), digest);
        }
        Ok(newest.into_values().collect())
    }

    /// As if a look was kept whole each half hour.
    fn looks_at(&self, bank: &str, at: Time) -> Result<Vec<Look>, HistoryError> {
        const HALF_HOUR_US: i64 = 1800 * US_PER_S;
        let stories = self.stories();
        let kept = Time::from_us(at.us().div_euclid(HALF_HOUR_US) * HALF_HOUR_US);
        let reaches = moment().us_since(at) < 6 * 3600 * US_PER_S;
        let found = stories.into_iter().find(|(v, _)| &*v.bank.name == bank);
        let Some((view, story)) = found.filter(|_| reaches) else {
            return Ok(Vec::new());
        };
        let names: Vec<Name> = view.sources.iter().map(|s| s.name.clone()).collect();
        let spans = view.bank.spans.iter();
        Ok(spans
            .map(|span| look(&view.bank, &names, story, *span, kept, 9))
            .collect())
    }

    fn notices(&self, after: Option<&str>, most: usize) -> Result<Page<Notice>, HistoryError> {
        let open = self
            .snapshot
            .banks
            .iter()
            .flat_map(|b| &b.open)
            .map(|n| Notice::clone(n));
        let past = self
            .snapshot
            .banks
            .first()
            .map_or_else(Vec::new, |b| past_notices(b));
        let all: Vec<Notice> = open.chain(past).collect();
        let start = match after {
            None => 0,
            Some(id) => {
                all.iter()
                    .position(|n| &*n.id == id)
                    .ok_or(HistoryError("no such place".to_owned()))?
                    + 1
            }
        };
        let items: Vec<Notice> = all.iter().skip(start).take(most).cloned().collect();
        let is_end = start + items.len() >= all.len();
        let next = items.last().filter(|_| !is_end).map(|n| n.id.to_string());
        Ok(Page { items, next })
    }

    fn notice(&self, id: &str) -> Result<Option<Notice>, HistoryError> {
        Ok(self
            .notices(None, usize::MAX)?
            .items
            .into_iter()
            .find(|n| &*n.id == id))
    }

    fn evidence(&self, _id: &str) -> Result<Option<Evidence>, HistoryError> {
        Ok(None)
    }
}
