//! Conditions as notices: one for each bank and kind, from the first source in trouble to the last.
//!
//! What must hold: while a source is silent or stuck nothing else is said of it; a condition that comes
//! back before anybody has seen its notice goes on with that notice. Deliberately absent: when a
//! condition holds (that is `judge`).

use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{SourceIx, Time, address_name};
use crate::notice::{ConditionFacts, Handling, Happening, Kind, Notice, Since, State, Trouble};

use super::bank::Watched;
use super::look::Freshness;
use super::papers::Sent;
use super::{Judged, Plant};

/// A condition whose notice is not over.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Standing {
    pub notice: Arc<Notice>,
    /// What is wrong; after the return, what was.
    pub troubles: Vec<Trouble>,
    pub sent: Sent,
}

impl Watched {
    /// Sources of which nothing else is to be said: they are silent or stuck.
    pub fn out_of_judgement(&self) -> Vec<SourceIx> {
        let kinds = [Kind::SourceSilent, Kind::SourceStuck];
        let holding = self.state.conditions.iter();
        let holding = holding.filter(|c| c.notice.holds() && kinds.contains(&c.notice.kind));
        let named = holding.flat_map(|c| &c.troubles);
        let named = named.filter_map(|t| t.source.as_ref());
        named.filter_map(|name| self.source_named(name)).collect()
    }

    /// Takes in what a condition has come to; gives its notice when that changed.
    pub fn condition(
        &mut self,
        plant: &Plant,
        judged: &Judged,
        now: Time,
    ) -> Option<(Arc<Notice>, Freshness)> {
        let mut all = self.state.conditions.iter();
        let open = all.position(|c| c.notice.kind == judged.kind);
        let (i, freshness) = match (open, judged.troubles.is_empty()) {
            (Some(i), _) => (i, Freshness::Changed),
            (None, true) => return None,
            (None, false) => {
                let standing = self.stand(plant, judged, now);
                self.state.conditions.push(standing);
                (self.state.conditions.len() - 1, Freshness::Raised)
            }
        };
        let held_back = self.holds_back(judged.kind, &plant.manners, now);
        let standing = &mut self.state.conditions[i];
        let notice = Arc::make_mut(&mut standing.notice);
        if judged.troubles.is_empty() {
            notice.happen(plant.manners.returns(), now);
        } else {
            standing.troubles.clone_from(&judged.troubles);
            // One that comes again before anybody saw it is told since then, not since it first came.
            notice.since = since(&judged.troubles, now);
            notice.happen(Happening::Occurs, now);
        }
        if held_back {
            notice.happen(Happening::HeldBack, now);
        }
        self.tell_condition(plant, i, now);
        let mut notice = self.state.conditions[i].notice.clone();
        if freshness == Freshness::Raised {
            let mut own = self.state.conditions.pop()?;
            self.state.take_over(Arc::make_mut(&mut own.notice), now);
            notice = own.notice.clone();
            self.state.conditions.push(own);
        }
        Some((notice, freshness))
    }

    fn stand(&mut self, plant: &Plant, judged: &Judged, now: Time) -> Standing {
        let id = self.notice_id(plant, now);
        self.note_raised(judged.kind, now);
        let bank = &self.bank;
        let notice = Notice {
            id,
            plant: plant.name.clone(),
            bank: bank.name.clone(),
            kind: judged.kind,
            state: State::Normal,
            priority: crate::notice::Priority::Low,
            sources: Vec::new(),
            unit: bank.characteristic.unit.clone(),
            since: since(&judged.troubles, now),
            raised: now,
            changed: now,
            returned: None,
            acknowledged: None,
            subject: String::new(),
            text: String::new(),
            advice: String::new(),
            url: format!("{}/banks/{}", plant.pages, address_name(&bank.name)),
            span: 0,
            pattern: None,
            slip: None,
            common_movement: None,
            even_mean: None,
            cost_per_hour: None,
            adjustment: None,
            handling: Handling::default(),
        };
        Standing {
            notice: Arc::new(notice),
            troubles: judged.troubles.clone(),
            sent: None,
        }
    }

    /// Puts the present figures into the notice's fields and words.
    fn tell_condition(&mut self, plant: &Plant, i: usize, now: Time) {
        let of = self.display_order().len();
        let standing = &mut self.state.conditions[i];
        let facts = ConditionFacts {
            bank: &self.bank,
            zone: &plant.zone,
            kind: standing.notice.kind,
            troubles: &standing.troubles,
            of,
            now,
            returned: standing.notice.returned,
            url: &standing.notice.url,
        };
        let (words, sources) = (facts.words(), facts.sources());
        let (unit, priority) = (facts.unit(), facts.priority());
        let notice = Arc::make_mut(&mut standing.notice);
        notice.sources = sources;
        notice.unit = unit;
        notice.priority = priority;
        notice.changed = now;
        notice.subject = words.subject;
        notice.advice = words.advice;
        notice.text = words.text;
    }
}

/// Since the first of them began.
fn since(troubles: &[Trouble], now: Time) -> Since {
    let at = troubles.iter().map(|t| t.since).min().unwrap_or(now);
    Since {
        at,
        earliest: at,
        latest: at,
    }
}
