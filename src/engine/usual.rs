//! Usual places, for a bank whose sources are each compared with their own past (`offsets = "learn"`).
//!
//! What must hold: all places are learnt at once, from the same values; the values they were learnt from
//! are not compared with them; an adjustment or a changeover makes every place void.

use crate::model::{Offsets, SourceIx};
use crate::verdict::{Data, Usual, learn_usual};

use super::bank::Watched;

/// Values of each source that its place is learnt from: beyond this a slow wander would be taken for a
/// place.
const MOST_LEARNT_FROM: usize = 640;

impl Watched {
    /// Where a source usually stands; `None` while that has to be learnt.
    pub fn usual(&self, source: SourceIx) -> Option<Usual> {
        let known = &self.state.sources[source.index()];
        Usual::known(&self.bank.offsets, &known.name).or(known.usual)
    }

    /// Every usual place is void: something was changed.
    pub fn forget_usual(&mut self) {
        for source in &mut self.state.sources {
            source.usual = None;
        }
    }

    /// Learns the usual places when somebody's is missing and all have values enough.
    pub fn learn_places(&mut self) {
        if self.bank.offsets != Offsets::Learn {
            return;
        }
        let taking_part: Vec<SourceIx> = self
            .display_order()
            .into_iter()
            .filter(|s| self.state.sources[s.index()].takes_part())
            .collect();
        let is_missing = |s: &SourceIx| self.state.sources[s.index()].usual.is_none();
        if taking_part.len() < 2 || !taking_part.iter().any(is_missing) {
            return;
        }
        let wanted = self.bank.window_length().min(MOST_LEARNT_FROM);
        let least = taking_part.len().div_ceil(2).max(2);
        let who: Vec<(SourceIx, Usual)> =
            taking_part.iter().map(|s| (*s, Usual::default())).collect();
        let data = Data::gather(&self.state.windows, &who, least, wanted);
        let columns = data.columns();
        let enough =
            columns.len() == taking_part.len() && columns.iter().all(|c| c.len() >= wanted);
        if !enough {
            return;
        }
        // Sources without any spread have no place that could be told from chance.
        let Ok(places) = learn_usual(&data, None) else {
            return;
        };
        let from = self.next_place();
        for (source, usual) in places {
            self.state.sources[source.index()].usual = Some(usual);
            self.state.windows.start_fresh(source, from);
        }
    }
}
