//! One bank: its windows, its sources and its incidents, and what a measurement or a look does to them.

use std::collections::{BTreeMap, VecDeque};
use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{Bank, Measurement, Name, Reason, SourceIx, Sources, Time};
use crate::notice::{Kind, Notice};
use crate::verdict::watch::{Crossing, Watch};
use crate::verdict::{Asked, Examination, Look, Need, Participant, examine};
use crate::window::{Accepted, Arriving, Windows};

use super::conditions::Standing;
use super::evidence::Premises;
use super::incident::Incident;
use super::judge::Senses;
use super::line::Line;
use super::natural::natural;
use super::papers::{Raised, Tally};
use super::shifts::Shifts;
use super::source::{Source, usual_interval_us};
use super::watching::{Pace, watch_for};
use super::{RefusalView, WindowValue, WindowView};

/// A clock may run ahead by this much; a value from further in the future is refused.
const AHEAD_US: i64 = 300_000_000;

/// Silence is looked for this often.
pub const SILENCE_EVERY_US: i64 = 10_000_000;

/// A bank that finds its sources itself counts cycles as complete only after this many without a new
/// source; until then they close when they are overtaken.
const SETTLED_AFTER: u64 = 5;

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
    /// The watch, where sources share cycles.
    pub watch: Option<Watch>,
    /// The rate of cycles for which its thresholds hold.
    pub pace: Pace,
    /// The line as its events left it.
    pub line: Line,
    /// Conditions whose notices are open, oldest first.
    pub conditions: Vec<Standing>,
    /// The newest notices that are over, oldest first.
    pub past: VecDeque<Arc<Notice>>,
    /// What its calls came to.
    pub tally: Tally,
    /// The newest notices raised, oldest first.
    pub raised_at: VecDeque<Raised>,
    /// What gathers of the day, where the sources are shifts.
    pub shifts: Shifts,
}

impl State {
    /// Begins with empty windows, as after a change of pairing: sources and numbers go on, incidents end
    /// at the next look because nothing they rest on is left.
    pub fn start_over(&mut self, bank: &Bank) {
        self.windows = Windows::new(bank);
        for source in &mut self.sources {
            self.windows.add_source();
            source.cleared_margin = 0.0;
        }
        self.watch = watch_for(bank);
        for _ in &self.sources {
            self.watch.iter_mut().for_each(Watch::add_source);
        }
        self.pace = Pace::default();
        self.shifts = Shifts::default();
        for incident in &mut self.incidents {
            incident.forget(&|_| true);
        }
        self.looks.clear();
        self.newest_source_at = 0;
    }
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
    /// What the look that is under way rests on.
    pub premises: Option<Premises>,
    /// What is only sensed, and begins afresh with the process.
    pub senses: Senses,
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
            watch: watch_for(&bank),
            pace: Pace::default(),
            line: Line::default(),
            conditions: Vec::new(),
            past: VecDeque::new(),
            tally: Tally::default(),
            raised_at: VecDeque::new(),
            shifts: Shifts::default(),
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
            premises: None,
            senses: Senses::default(),
        };
        let names = watched.bank.sources.names();
        let is_listed = names.is_some();
        let listed = names.unwrap_or_default();
        for (s, source) in watched.state.sources.iter_mut().enumerate() {
            source.retired = is_listed && !listed.contains(&source.name);
            let waited_for = !source.retired && !source.silent && !source.out_of_use;
            watched.state.windows.expect(SourceIx(s as u16), waited_for);
        }
        for name in listed {
            if !watched.by_name.contains_key(&name) {
                watched.add_source(name, false);
            }
        }
        let sources = &watched.state.sources;
        let gone = |s: SourceIx| sources.get(s.index()).is_none_or(|s| s.retired);
        for incident in &mut watched.state.incidents {
            incident.forget(&gone);
        }
        watched.fit_shifts();
        watched.settle();
        watched.follow_product();
        watched.retune();
        watched
    }

    fn add_source(&mut self, name: Name, discovered: bool) -> SourceIx {
        let ix = SourceIx(self.state.sources.len() as u16);
        self.state.windows.add_source();
        self.state.watch.iter_mut().for_each(Watch::add_source);
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
        let listed = !matches!(self.bank.sources, Sources::Discover { .. });
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
        let stopped = self.state.line.stopped.as_ref();
        if stopped.is_some_and(|stop| taken >= stop.at) {
            return Err(Reason::LineStopped);
        }
        let bank = self.bank.clone();
        let accepted = if let Sources::Shifts(calendar) = &bank.sources {
            self.gather(calendar, m, (taken, now))?
        } else {
            let arriving = Arriving {
                source: self.source(&m.source)?,
                value: m.value,
                taken,
                time_given: m.taken.is_some(),
                cycle: m.cycle,
            };
            self.enter(&arriving, now)?
        };
        let outcome = match accepted {
            Accepted::InTurn => "accepted",
            Accepted::Late => "late",
        };
        *self.outcomes.entry(outcome).or_insert(0) += 1;
        self.state.began.get_or_insert(now);
        self.plan_look(now);
        Ok(())
    }

    /// Puts a value of a source, received at `now`, into its window.
    ///
    /// # Errors
    /// The reason when the window refuses it.
    pub fn enter(&mut self, arriving: &Arriving, now: Time) -> Result<Accepted, Reason> {
        let source = arriving.source;
        let closed = self.closed();
        // Whoever delivers is waited for again, from this very cycle on.
        let was_silent = self.state.sources[source.index()].silent;
        if was_silent {
            self.state.windows.expect(source, true);
        }
        let accepted = match self.state.windows.accept(arriving) {
            Ok(accepted) => accepted,
            Err(reason) => {
                // What is refused wakes nobody.
                self.state.windows.expect(source, !was_silent);
                return Err(reason);
            }
        };
        let known = &mut self.state.sources[source.index()];
        known.accepted += 1;
        known.last_value = Some(arriving.value.to_f64());
        known.last_taken = known.last_taken.max(Some(arriving.taken));
        known.last_received = Some(now);
        known.silent = false;
        if closed != self.closed() {
            self.settle();
        }
        Ok(accepted)
    }

    /// A source by its name.
    pub fn source_named(&self, name: &Name) -> Option<SourceIx> {
        let known = self.by_name.get(name).copied();
        known.filter(|s| !self.state.sources[s.index()].retired)
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
            Sources::Listed(_) | Sources::Shifts(_) => Err(Reason::UnknownSource),
            Sources::Discover { most } if self.state.sources.len() >= usize::from(most) => {
                Err(Reason::TooManySources)
            }
            Sources::Discover { .. } => Ok(self.add_source(name.clone(), true)),
        }
    }

    /// Plans the next look; never further ahead than one period, so that a clock that was set back does
    /// not stop the looks. A bank of shifts is looked at when a shift is over.
    pub fn plan_look(&mut self, now: Time) {
        let every = self.bank.look_every_us;
        let began = self.state.began.unwrap_or(now);
        let next = self.state.last_look.unwrap_or(began).plus_us(every);
        let planned = self.state.look_due.unwrap_or(next.max(now));
        self.state.look_due = match self.bank.sources {
            Sources::Shifts(_) => self.state.shifts.next_end(),
            _ => Some(planned.min(now.plus_us(every))),
        };
        self.next_silence_check = self
            .next_silence_check
            .min(Some(now.plus_us(SILENCE_EVERY_US)));
    }

    /// Sources that have delivered nothing for longer than they may.
    pub fn fallen_silent(&self, now: Time) -> Vec<SourceIx> {
        let Some(began) = self.state.began else {
            return Vec::new();
        };
        let line = &self.state.line;
        if line.stopped.is_some() {
            return Vec::new();
        }
        let began = line.started.unwrap_or(began).max(began);
        let fallen = |(s, source): (usize, &Source)| {
            let ix = SourceIx(s as u16);
            let ring = self.state.windows.ring(ix);
            let since = source.silent_from(&self.bank, ring, began);
            let judged = !source.silent && !source.retired && !source.out_of_use;
            (judged && since <= now).then_some(ix)
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

    /// Whether its last checkpoint lacks something, be it only that turns up to `last` passed it by.
    pub fn is_behind(&self, last: u64) -> bool {
        self.unsaved || self.state.turn < last
    }

    /// Sources in display order: as listed, else by natural number.
    pub fn display_order(&self) -> Vec<SourceIx> {
        let mut order: Vec<SourceIx> = (0..self.state.sources.len())
            .map(|s| SourceIx(s as u16))
            .filter(|s| !self.state.sources[s.index()].retired)
            .collect();
        match self.bank.sources.names() {
            Some(names) => {
                let place = |s: &SourceIx| names.iter().position(|n| *n == self.name(*s));
                order.sort_by_key(place);
            }
            None => order.sort_by(|a, b| natural(&self.name(*a), &self.name(*b))),
        }
        order
    }

    pub fn name(&self, source: SourceIx) -> Name {
        self.state.sources[source.index()].name.clone()
    }

    /// Examines the windows without consequences; a crossing of the watch decides what is called.
    pub fn examine(&self, now: Time, need: Need, crossing: Option<&Crossing>) -> Examination {
        let who = self.participants();
        let active = self.state.incidents.iter().filter(|i| i.is_active());
        let open = active.filter_map(Incident::as_call).next();
        let asked = Asked {
            at: now,
            need,
            interval_us: self.slowest_interval_us(),
            crossing,
            open: open.as_ref(),
        };
        examine(&self.bank, &self.state.windows, &who, asked)
    }

    /// The sources that a look compares, in display order.
    pub fn participants(&self) -> Vec<Participant> {
        let takes_part = |s: &SourceIx| self.state.sources[s.index()].takes_part();
        let participant = |s: SourceIx| Participant {
            source: s,
            name: self.name(s),
            margin: self
                .bank
                .margin
                .max(self.state.sources[s.index()].cleared_margin),
            silent: self.state.sources[s.index()].silent,
            usual: self.usual(s),
        };
        let in_order = self.display_order().into_iter();
        in_order.filter(takes_part).map(participant).collect()
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

    /// The time between values of the slowest source that delivers.
    pub fn slowest_interval_us(&self) -> Option<i64> {
        let sources = self.state.sources.iter().zip(self.state.windows.rings());
        let delivers = sources.filter(|(s, _)| s.takes_part() && !s.silent);
        delivers.filter_map(|(_, r)| usual_interval_us(r)).max()
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

fn names(sources: &[Source]) -> BTreeMap<Name, SourceIx> {
    let each = sources.iter().enumerate();
    each.map(|(s, source)| (source.name.clone(), SourceIx(s as u16)))
        .collect()
}
