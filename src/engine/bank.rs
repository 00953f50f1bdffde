//! One bank: its windows, its sources and its incidents, and what a measurement or a look does to them.

use std::cmp::Ordering;
use std::collections::BTreeMap;
use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{Bank, Measurement, Name, Reason, SourceIx, Sources, Time};
use crate::notice::{Kind, Notice};
use crate::verdict::{Aspect, Call, Examination, Look, Need, Participant, examine};
use crate::window::{Accepted, Arriving, Windows};

use super::incident::{Incident, Surroundings};
use super::source::{Source, usual_interval_us};
use super::{Plant, RefusalView, WindowValue, WindowView};

/// A clock may run ahead by this much; a value from further in the future is refused.
const AHEAD_US: i64 = 300_000_000;

/// A bank that finds its sources itself counts cycles as complete only after this many without a new
/// source; until then they close when they are overtaken.
const SETTLED_AFTER: u64 = 5;

/// A look is kept whole at least this often.
const KEEP_LOOK_EVERY_US: i64 = 3_600_000_000;

/// What is kept of a bank over a restart.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct State {
    /// The last turn that is contained.
    pub turn: u64,
    pub windows: Windows,
    pub sources: Vec<Source>,
    /// Open incidents, oldest first.
    pub incidents: Vec<Incident>,
    /// The newest look of each span.
    pub looks: Vec<Arc<Look>>,
    pub last_look: Option<Time>,
    pub look_due: Option<Time>,
    pub last_kept_look: Option<Time>,
    /// When the first measurement came.
    pub began: Option<Time>,
    /// Closed cycles when the newest source was found.
    pub newest_source_at: u64,
    /// Notices made so far.
    pub notices: u64,
}

/// A bank with its state and what is only counted.
pub struct Watched {
    pub bank: Arc<Bank>,
    pub state: State,
    by_name: BTreeMap<Name, SourceIx>,
    pub outcomes: BTreeMap<&'static str, u64>,
    pub refusals: Vec<RefusalView>,
    pub raised: BTreeMap<Kind, u64>,
    /// Changed since the snapshot was made.
    pub dirty: bool,
    /// Changed since the last checkpoint.
    pub unsaved: bool,
    pub next_silence_check: Option<Time>,
    pub last_checkpoint: Option<Time>,
}

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

impl Watched {
    pub fn new(bank: Arc<Bank>) -> Self {
        let state = State {
            turn: 0,
            windows: Windows::new(&bank),
            sources: Vec::new(),
            incidents: Vec::new(),
            looks: Vec::new(),
            last_look: None,
            look_due: None,
            last_kept_look: None,
            began: None,
            newest_source_at: 0,
            notices: 0,
        };
        Self::with_state(bank, state)
    }

    /// Goes on from a state; sources that were listed meanwhile join, those no longer listed retire.
    pub fn with_state(bank: Arc<Bank>, state: State) -> Self {
        let mut watched = Self {
            by_name: names(&state.sources),
            bank,
            state,
            outcomes: BTreeMap::new(),
            refusals: Vec::new(),
            raised: BTreeMap::new(),
            dirty: true,
            unsaved: false,
            next_silence_check: None,
            last_checkpoint: None,
        };
        if let Sources::Listed(listed) = watched.bank.sources.clone() {
            for (s, source) in watched.state.sources.iter_mut().enumerate() {
                source.retired = !listed.contains(&source.name);
                if source.retired {
                    watched.state.windows.expect(SourceIx(s as u16), false);
                }
            }
            for name in listed {
                if !watched.by_name.contains_key(&name) {
                    watched.add_source(name, false);
                }
            }
        }
        watched.settle();
        watched
    }

    fn add_source(&mut self, name: Name, discovered: bool) -> SourceIx {
        let ix = SourceIx(self.state.sources.len() as u16);
        self.state.windows.add_source();
        self.state
            .sources
            .push(Source::new(name.clone(), discovered));
        self.state.newest_source_at = self.closed();
        self.by_name.insert(name, ix);
        self.settle();
        ix
    }

    fn closed(&self) -> u64 {
        self.state
            .windows
            .blocks()
            .map_or(0, |b| b.counts().0 + b.counts().1)
    }

    /// Whether the set of sources is known well enough to call a cycle complete.
    fn settle(&mut self) {
        let listed = matches!(self.bank.sources, Sources::Listed(_));
        let quiet = self.closed() >= self.state.newest_source_at + SETTLED_AFTER;
        self.state.windows.settle(listed || quiet);
    }

    /// Takes one measurement in.
    ///
    /// # Errors
    /// The reason when it is refused.
    pub fn accept(&mut self, m: &Measurement, now: Time) -> Result<(), Reason> {
        let taken = m.taken.unwrap_or(now);
        if taken.us_since(now) > AHEAD_US {
            return Err(Reason::TooFarAhead);
        }
        if now.us_since(taken) > self.bank.oldest_us {
            return Err(Reason::TooOld);
        }
        let source = self.source(&m.source)?;
        let arriving = Arriving {
            source,
            value: m.value,
            taken,
            time_given: m.taken.is_some(),
            cycle: m.cycle,
        };
        let closed = self.closed();
        let accepted = self.state.windows.accept(&arriving)?;
        let known = &mut self.state.sources[source.index()];
        known.accepted += 1;
        known.last_value = Some(m.value.to_f64());
        known.last_taken = known.last_taken.max(Some(taken));
        known.last_received = Some(now);
        if std::mem::take(&mut known.silent) {
            self.state.windows.expect(source, true);
        }
        if closed != self.closed() {
            self.settle();
        }
        let outcome = match accepted {
            Accepted::InTurn => "accepted",
            Accepted::Late => "late",
        };
        *self.outcomes.entry(outcome).or_insert(0) += 1;
        self.state.began.get_or_insert(now);
        self.plan_look(now);
        Ok(())
    }

    fn source(&mut self, name: &Name) -> Result<SourceIx, Reason> {
        if let Some(&ix) = self.by_name.get(name) {
            return if self.state.sources[ix.index()].retired {
                Err(Reason::UnknownSource)
            } else {
                Ok(ix)
            };
        }
        match self.bank.sources {
            Sources::Listed(_) => Err(Reason::UnknownSource),
            Sources::Discover { most } if self.state.sources.len() >= usize::from(most) => {
                Err(Reason::TooManySources)
            }
            Sources::Discover { .. } => Ok(self.add_source(name.clone(), true)),
        }
    }

    fn plan_look(&mut self, now: Time) {
        let every = self.bank.look_every_us;
        let began = self.state.began.unwrap_or(now);
        let next = self.state.last_look.unwrap_or(began).plus_us(every);
        self.state.look_due.get_or_insert(next.max(now));
    }

    /// Sources that have delivered nothing for longer than they may.
    pub fn fallen_silent(&self, now: Time) -> Vec<SourceIx> {
        let Some(began) = self.state.began else {
            return Vec::new();
        };
        let fallen = |(s, source): (usize, &Source)| {
            let ix = SourceIx(s as u16);
            let ring = self.state.windows.ring(ix);
            let since = source.silent_from(&self.bank, ring, began);
            (!source.silent && !source.retired && since <= now).then_some(ix)
        };
        self.state
            .sources
            .iter()
            .enumerate()
            .filter_map(fallen)
            .collect()
    }

    /// Nobody waits for a silent source any more.
    pub fn silence(&mut self, source: SourceIx) {
        if let Some(known) = self.state.sources.get_mut(source.index()) {
            known.silent = true;
            self.state.windows.expect(source, false);
        }
    }

    /// A turn has changed the state.
    pub fn mark(&mut self, turn: u64) {
        self.state.turn = turn;
        self.dirty = true;
        self.unsaved = true;
    }

    /// Sources in display order: as listed, else by natural number.
    pub fn display_order(&self) -> Vec<SourceIx> {
        let mut order: Vec<SourceIx> = (0..self.state.sources.len())
            .map(|s| SourceIx(s as u16))
            .filter(|s| !self.state.sources[s.index()].retired)
            .collect();
        match &self.bank.sources {
            Sources::Listed(listed) => {
                let place = |s: &SourceIx| listed.iter().position(|n| *n == self.name(*s));
                order.sort_by_key(place);
            }
            Sources::Discover { .. } => {
                order.sort_by(|a, b| natural(&self.name(*a), &self.name(*b)))
            }
        }
        order
    }

    pub fn name(&self, source: SourceIx) -> Name {
        self.state.sources[source.index()].name.clone()
    }

    /// Examines the windows without consequences.
    pub fn examine(&self, now: Time, need: Need) -> Examination {
        let takes_part = |s: &SourceIx| self.state.sources[s.index()].takes_part();
        let participant = |s: SourceIx| Participant {
            source: s,
            name: self.name(s),
            margin: self
                .bank
                .margin
                .max(self.state.sources[s.index()].cleared_margin),
        };
        let who: Vec<Participant> = self
            .display_order()
            .into_iter()
            .filter(takes_part)
            .map(participant)
            .collect();
        examine(&self.bank, &self.state.windows, &who, now, need)
    }

    /// A look that is due: examines, follows the open incidents, begins new ones.
    pub fn look(&mut self, plant: &Plant, now: Time) -> Looked {
        self.state.look_due = None;
        self.state.last_look = Some(now);
        let exam = self.examine(now, Need::WholeSpan);
        let interval_us = self.interval_us();
        // What an open incident is about is not called anew, also when this look ends it: the
        // examination still holds the values of before.
        let open: Vec<Aspect> = self
            .state
            .incidents
            .iter()
            .filter(|i| i.is_active())
            .map(|i| i.aspect)
            .collect();
        let about: Vec<SourceIx> = self
            .state
            .incidents
            .iter()
            .flat_map(Incident::about)
            .collect();
        let mut changed = self.follow(plant, &exam, now, interval_us);
        let mut calls = exam.calls.clone();
        calls.retain(|c| !open.contains(&c.aspect));
        for call in &mut calls {
            call.named.retain(|s| !about.contains(s));
        }
        changed.extend(self.begin(plant, calls, &exam, now, interval_us));
        let looks: Vec<Arc<Look>> = exam.looks.into_iter().map(Arc::new).collect();
        self.state.looks.clone_from(&looks);
        self.state.incidents.retain(|i| i.notice.state.is_open());
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
        let apart = looks.iter().any(|l| {
            matches!(
                l.finding,
                crate::verdict::Finding::LevelApart | crate::verdict::Finding::SpreadApart
            )
        });
        let keep = hourly || apart || notice_changed;
        if keep {
            self.state.last_kept_look = Some(now);
        }
        keep
    }

    fn follow(
        &mut self,
        plant: &Plant,
        exam: &Examination,
        now: Time,
        interval_us: Option<i64>,
    ) -> Vec<(Arc<Notice>, Freshness)> {
        let mut incidents = std::mem::take(&mut self.state.incidents);
        let mut changed = Vec::new();
        for incident in incidents.iter_mut().filter(|i| i.is_active()) {
            let before = incident.notice.clone();
            let name = |s: SourceIx| self.name(s);
            let about = surroundings(
                plant,
                &self.bank,
                &self.state.windows,
                exam,
                &name,
                now,
                interval_us,
            );
            let sigma = about.sigma();
            let back = incident.follow(&about);
            if incident.notice != before {
                changed.push((incident.notice.clone(), Freshness::Changed));
            }
            for (source, from) in back {
                self.state.windows.start_fresh(source, from);
                let cleared = crate::verdict::cleared_margin(self.bank.margin, sigma);
                let known = &mut self.state.sources[source.index()].cleared_margin;
                *known = known.max(cleared);
            }
        }
        self.state.incidents = incidents;
        changed
    }

    /// New incidents, each about sources that no open one is about: one source and cause, one notice.
    fn begin(
        &mut self,
        plant: &Plant,
        calls: Vec<Call>,
        exam: &Examination,
        now: Time,
        interval_us: Option<i64>,
    ) -> Vec<(Arc<Notice>, Freshness)> {
        let mut changed = Vec::new();
        for mut call in calls {
            call.named
                .retain(|s| !self.state.incidents.iter().any(|i| i.is_about(*s)));
            let id = self.notice_id(plant, now);
            let name = |s: SourceIx| self.name(s);
            let about = surroundings(
                plant,
                &self.bank,
                &self.state.windows,
                exam,
                &name,
                now,
                interval_us,
            );
            let Some(incident) = Incident::begin(&call, id, &about) else {
                continue;
            };
            self.state.notices += 1;
            *self.raised.entry(incident.notice.kind).or_insert(0) += 1;
            changed.push((incident.notice.clone(), Freshness::Raised));
            self.state.incidents.push(incident);
        }
        changed
    }

    /// Bank, year in the plant's zone, running number.
    fn notice_id(&self, plant: &Plant, now: Time) -> Name {
        let year = now.to_jiff().map_or(0, |t| {
            i64::from(t.to_zoned_datetime(plant.zone.clone()).year())
        });
        let word: String = self
            .bank
            .name
            .chars()
            .map(|c| if c.is_alphanumeric() { c } else { '-' })
            .collect();
        format!("{word}-{year}-{:04}", self.state.notices + 1).into()
    }

    /// The usual time between values of a source: the median over the sources.
    pub fn interval_us(&self) -> Option<i64> {
        let mut all: Vec<i64> = self
            .state
            .windows
            .rings()
            .iter()
            .filter_map(usual_interval_us)
            .collect();
        all.sort_unstable();
        all.get(all.len() / 2).copied()
    }

    /// Every window, in display order.
    pub fn window_views(&self) -> Vec<WindowView> {
        let paired = self.bank.pairing.is_paired();
        let value = |e: &crate::window::Entry| WindowValue {
            taken: e.taken,
            cycle: paired.then_some(e.place),
            offset: e.offset,
        };
        let view = |s: SourceIx| WindowView {
            source: self.name(s),
            origin: self.state.windows.origin(),
            values: self.state.windows.ring(s).iter().map(value).collect(),
        };
        self.display_order().into_iter().map(view).collect()
    }
}

fn surroundings<'a>(
    plant: &'a Plant,
    bank: &'a Bank,
    windows: &'a Windows,
    exam: &'a Examination,
    name: &'a dyn Fn(SourceIx) -> Name,
    now: Time,
    interval_us: Option<i64>,
) -> Surroundings<'a> {
    Surroundings {
        plant,
        bank,
        windows,
        exam,
        name,
        now,
        interval_us,
    }
}

fn names(sources: &[Source]) -> BTreeMap<Name, SourceIx> {
    let each = sources.iter().enumerate();
    each.map(|(s, source)| (source.name.clone(), SourceIx(s as u16)))
        .collect()
}

/// Orders names by the whole numbers in them, so that head 2 stands before head 10.
pub fn natural(a: &str, b: &str) -> Ordering {
    let mut a_rest = a;
    let mut b_rest = b;
    while !a_rest.is_empty() && !b_rest.is_empty() {
        let (a_part, a_next) = part(a_rest);
        let (b_part, b_next) = part(b_rest);
        let order = match (number(a_part), number(b_part)) {
            (Some(x), Some(y)) => x.cmp(&y),
            _ => a_part.cmp(b_part),
        };
        if order != Ordering::Equal {
            return order;
        }
        (a_rest, b_rest) = (a_next, b_next);
    }
    a.len().cmp(&b.len()).then_with(|| a.cmp(b))
}

fn part(text: &str) -> (&str, &str) {
    let digit = text.starts_with(|c: char| c.is_ascii_digit());
    let end = text
        .find(|c: char| c.is_ascii_digit() != digit)
        .unwrap_or(text.len());
    text.split_at(end)
}

fn number(text: &str) -> Option<u128> {
    text.parse().ok()
}

#[cfg(test)]
mod tests {
    use super::natural;

    #[test]
    fn names_stand_in_the_order_of_their_numbers() {
        let mut names = vec![
            "head 10", "head 2", "head 1", "b", "a12", "a3", "007", "7", "08",
        ];
        names.sort_by(|a, b| natural(a, b));
        assert_eq!(
            names,
            [
                "7", "007", "08", "a3", "a12", "b", "head 1", "head 2", "head 10"
            ]
        );
    }
}
