//! What a look that is due does to a bank: open incidents follow it, new ones begin.

use std::sync::Arc;

use crate::model::{Name, SourceIx, Time, topic_name};
use crate::notice::{Happening, Kind, Notice};
use crate::verdict::watch::Watch;
use crate::verdict::{Aspect, Call, Examination, Finding, Look, Need, cleared_margin};

use super::Plant;
use super::bank::Watched;
use super::incident::{Incident, Surroundings};
use super::papers::remember;

/// A look is kept whole at least this often.
const KEEP_LOOK_EVERY_US: i64 = 3_600_000_000;

/// What a look at a bank brought.
pub struct Looked {
    pub looks: Vec<Arc<Look>>,
    /// Incidents whose notice changed, by their place; the flag says it has just been raised.
    pub changed: Vec<(Arc<Notice>, Freshness)>,
    pub keep_whole: bool,
}

/// Whether a notice has just been raised.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Freshness {
    Raised,
    Changed,
}

/// One look at a bank, as its incidents need to know it.
struct Occasion<'a> {
    plant: &'a Plant,
    exam: &'a Examination,
    now: Time,
    interval_us: Option<i64>,
}

impl<'a> Occasion<'a> {
    fn at(&self, watched: &'a Watched, taken: &'a [SourceIx]) -> Surroundings<'a> {
        Surroundings {
            plant: self.plant,
            watched,
            exam: self.exam,
            now: self.now,
            interval_us: self.interval_us,
            taken,
        }
    }
}

impl Watched {
    /// A look that is due: examines, follows the open incidents, begins new ones.
    pub fn look(&mut self, plant: &Plant, now: Time) -> Looked {
        self.state.look_due = None;
        self.state.last_look = Some(now);
        self.follow_pace(now);
        self.learn_places();
        self.premises = Some(self.premises_of(now, None));
        let exam = self.examine(now, Need::WholeSpan, None);
        self.conclude(plant, now, exam)
    }

    /// What an examination means for the incidents: open ones follow it, new ones begin.
    pub fn conclude(&mut self, plant: &Plant, now: Time, exam: Examination) -> Looked {
        let occasion = Occasion {
            plant,
            exam: &exam,
            now,
            interval_us: self.interval_us(),
        };
        // What an open incident is about is not called anew, also when this look ends it: the
        // examination still holds the values of before.
        let active = || self.state.incidents.iter().filter(|i| i.is_active());
        let open: Vec<Aspect> = active().map(|i| i.aspect).collect();
        let mut about: Vec<SourceIx> = active().flat_map(Incident::about).collect();
        // One source, one cause, one notice: silent and stuck go before anything else.
        about.extend(self.out_of_judgement());
        about.extend(self.stuck_now());
        let mut changed = self.follow(&occasion);
        if let Some(mut call) = exam.crossed.clone() {
            call.named.retain(|s| !about.contains(s));
            call.reference.retain(|s| !about.contains(s));
            changed.extend(self.admit_or_begin(call, &occasion));
            // Whatever came of it, the same evidence is not to call twice.
            self.state.watch.iter_mut().for_each(Watch::begin_afresh);
        } else if !self.watch_decides() {
            let mut calls = exam.calls.clone();
            calls.retain(|c| !open.contains(&c.aspect));
            for call in &mut calls {
                call.named.retain(|s| !about.contains(s));
            }
            changed.extend(calls.into_iter().filter_map(|c| self.begin(c, &occasion)));
        }
        let looks: Vec<Arc<Look>> = exam.looks.into_iter().map(Arc::new).collect();
        self.state.looks.clone_from(&looks);
        // An incident that is over goes when its last word was sent, not before.
        let keep_whole = self.keep_whole(&looks, now, !changed.is_empty());
        Looked {
            looks,
            changed,
            keep_whole,
        }
    }

    fn keep_whole(&mut self, looks: &[Arc<Look>], now: Time, notice_changed: bool) -> bool {
        let last = self.state.last_kept_look;
        let hourly = last.is_none_or(|at| now.us_since(at) >= KEEP_LOOK_EVERY_US);
        let apart = looks
            .iter()
            .any(|l| matches!(l.finding, Finding::LevelApart | Finding::SpreadApart));
        let keep = hourly || apart || notice_changed;
        if keep {
            self.state.last_kept_look = Some(now);
        }
        keep
    }

    fn follow(&mut self, occasion: &Occasion) -> Vec<(Arc<Notice>, Freshness)> {
        let mut incidents = std::mem::take(&mut self.state.incidents);
        let mut changed = Vec::new();
        for i in 0..incidents.len() {
            if !incidents[i].is_active() {
                continue;
            }
            let taken: Vec<SourceIx> = (0..incidents.len())
                .filter(|j| *j != i)
                .flat_map(|j| incidents[j].about())
                .collect();
            let incident = &mut incidents[i];
            let before = incident.notice.clone();
            let about = occasion.at(self, &taken);
            let sigma = about.sigma();
            let back = incident.follow(&about);
            if incident.notice != before {
                changed.push((incident.notice.clone(), Freshness::Changed));
            }
            let aspect = incident.aspect;
            for (source, from) in back {
                self.state.windows.start_fresh(source, from);
                self.watch_with(source, aspect, cleared_margin(self.bank.margin, sigma));
            }
        }
        self.state.incidents = incidents;
        changed
    }

    /// What the watch calls joins the open incident of its kind, or begins one.
    fn admit_or_begin(
        &mut self,
        call: Call,
        occasion: &Occasion,
    ) -> Option<(Arc<Notice>, Freshness)> {
        let mut incidents = std::mem::take(&mut self.state.incidents);
        let same = |i: &&mut Incident| i.is_active() && i.aspect == call.aspect;
        let joined = incidents.iter_mut().find(same).map(|incident| {
            let admitted = incident.admit(&call, &occasion.at(self, &[]));
            admitted.then(|| (incident.notice.clone(), Freshness::Changed))
        });
        self.state.incidents = incidents;
        match joined {
            Some(changed) => changed,
            None => self.begin(call, occasion),
        }
    }

    /// A new incident about sources that no open one is about: one source and cause, one notice.
    fn begin(&mut self, mut call: Call, occasion: &Occasion) -> Option<(Arc<Notice>, Freshness)> {
        let is_open = |s: &SourceIx| self.state.incidents.iter().any(|i| i.is_about(*s));
        call.named.retain(|s| !is_open(s));
        let id = self.notice_id(occasion.plant, occasion.now);
        let mut incident = Incident::begin(&call, id, &occasion.at(self, &[]))?;
        self.state
            .take_over(Arc::make_mut(&mut incident.notice), occasion.now);
        if self.holds_back(incident.notice.kind, &occasion.plant.manners, occasion.now) {
            Arc::make_mut(&mut incident.notice).happen(Happening::HeldBack, occasion.now);
        }
        self.note_raised(incident.notice.kind, occasion.now);
        let raised = (incident.notice.clone(), Freshness::Raised);
        self.state.incidents.push(incident);
        Some(raised)
    }

    /// Counts a notice that was raised.
    pub fn note_raised(&mut self, kind: Kind, now: Time) {
        self.state.notices += 1;
        self.state.tally.calls += u64::from(kind.is_call());
        *self.raised.entry(kind).or_insert(0) += 1;
        remember(&mut self.state.raised_at, kind, now);
    }

    /// Bank, year in the plant's zone, running number.
    pub fn notice_id(&self, plant: &Plant, now: Time) -> Name {
        let year = now.to_jiff().map_or(0, |t| {
            i64::from(t.to_zoned_datetime(plant.zone.clone()).year())
        });
        let word = topic_name(&self.bank.name);
        format!("{word}-{year}-{:04}", self.state.notices + 1).into()
    }
}
