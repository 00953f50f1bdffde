//! The engine as a thing that steps: a cycle's values in, notices out. A state that has been learnt
//! once is gone on from many times.

use std::collections::BTreeMap;
use std::sync::{Arc, Mutex};

use evenrow::engine::{Effect, Engine, Event, Record};
use evenrow::model::{Bank, BankIx, Budget, Measurement, Name, Pairing, Time, US_PER_S, Value};
use evenrow::notice::{Kind, Manners, Notice};
use evenrow::verdict::watch::Progress;

use super::crew::Crew;
use super::feed::{Feed, Setup};
use super::line::{self, START, head};

/// A budget that is never spent, for the time before anything is judged.
const NEVER: f64 = 1e9;

/// A bank that calls this often although nothing is wrong has nothing to learn.
const ATTEMPTS: u64 = 20;

/// More sources than any bank of these simulations has.
const MOST_SOURCES: usize = 250;

/// Something that is given cycle after cycle until it calls.
pub trait Stepper {
    /// Takes a cycle in; says whether it calls now.
    fn step(&mut self, values: &[f64]) -> bool;
}

/// The bank of a setup; a cycle a second, so that its budget counts cycles.
pub fn bank(setup: &Setup) -> Bank {
    let mut bank = line::bank(setup.k);
    bank.characteristic.resolution = (setup.resolution > 0.0).then_some(setup.resolution);
    bank.pairing = setup.pairing;
    bank.margin = setup.margin;
    bank.spread_margin = setup.spread_margin;
    bank.look_every_us = setup.look_every * US_PER_S;
    bank.budget = Budget::new(1.0, setup.arl0 / 86_400.0).expect("above zero");
    if setup.pairing == Pairing::None {
        bank.spans = vec![10, 40, 160];
    }
    bank
}

/// From where the runs of a row begin.
#[derive(Clone, Copy, Debug)]
pub enum Start {
    /// From nothing.
    Fresh,
    /// From this many learnt states in turn.
    Learnt(usize),
}

/// The beginnings of a row's runs.
pub struct Starts<'a> {
    setup: &'a Setup,
    learnt: Arc<Vec<Learnt>>,
}

impl Start {
    /// Learns what has not been learnt for an earlier row.
    pub fn prepare(self, setup: &Setup) -> Starts<'_> {
        let learnt = match self {
            Self::Fresh => Arc::default(),
            Self::Learnt(states) => learnt(setup, states),
        };
        Starts { setup, learnt }
    }
}

impl Starts<'_> {
    /// An engine and its plant for a run, with chances of the run's own.
    pub fn begin(&self, run: usize, seed: u64) -> (Rig, Feed) {
        if self.learnt.is_empty() {
            return (Rig::new(self.setup), Feed::new(self.setup, seed));
        }
        Rig::learnt(self.setup, &self.learnt[run % self.learnt.len()], seed)
    }
}

/// States of a setup, learnt once and kept for all rows: the budget has no part in what is learnt.
fn learnt(setup: &Setup, states: usize) -> Arc<Vec<Learnt>> {
    static KEPT: Mutex<BTreeMap<String, Arc<Vec<Learnt>>>> = Mutex::new(BTreeMap::new());
    let patient = Setup {
        arl0: NEVER,
        look_every: 1000,
        ..setup.clone()
    };
    let key = format!("{states} {patient:?}");
    if let Some(known) = KEPT.lock().expect("nobody panicked").get(&key) {
        return known.clone();
    }
    let crew = Crew { tick: &|| () };
    let all = Arc::new(crew.each(states, |s| learn(&patient, s as u64)));
    let mut kept = KEPT.lock().expect("nobody panicked");
    kept.insert(key, all.clone());
    all
}

/// A bank's engine after learning, with the plant that it learnt on.
pub struct Learnt {
    state: Vec<u8>,
    turn: u64,
    cycle: i64,
    feed: Feed,
}

/// The engine and everything it told.
pub struct Rig {
    pub engine: Engine,
    /// Cycles so far; there is one a second.
    pub cycle: i64,
    /// Added to the cycle for the number that the plant sends.
    pub counter: i64,
    names: Vec<Name>,
    bank: Name,
    /// The newest version of each notice, in the order in which they were raised.
    pub notices: Vec<Arc<Notice>>,
}

impl Rig {
    /// An engine that knows nothing yet.
    pub fn new(setup: &Setup) -> Self {
        Self::of(bank(setup))
    }

    /// The same for a bank of one's own.
    pub fn of(bank: Bank) -> Self {
        Self {
            cycle: 0,
            counter: 0,
            names: (1..=MOST_SOURCES).map(head).collect(),
            bank: bank.name.clone(),
            engine: Engine::new(
                line::plant(Vec::new(), Manners::default()),
                vec![Arc::new(bank)],
            ),
            notices: Vec::new(),
        }
    }

    /// Goes on from what was learnt, with chances of its own.
    fn learnt(setup: &Setup, learnt: &Learnt, seed: u64) -> (Self, Feed) {
        let mut rig = Self::new(setup);
        rig.go_on(learnt.cycle, &learnt.state, learnt.turn);
        let mut feed = learnt.feed.clone();
        feed.reseed(seed);
        (rig, feed)
    }

    fn go_on(&mut self, cycle: i64, state: &[u8], turn: u64) {
        self.engine
            .restore(&self.bank, state)
            .expect("a state of this very bank");
        self.engine.resume(turn, &[]);
        self.cycle = cycle;
    }

    /// An engine for another form of this bank, which goes on from here.
    pub fn changed(mut self, bank: Bank) -> Self {
        let mut other = Self::of(bank);
        let (state, turn) = self.state();
        other.go_on(self.cycle, &state, turn);
        other.counter = self.counter;
        other.notices = self.notices;
        other
    }

    /// A row about the watch says nothing while the looks still decide.
    fn check_learnt(&mut self, setup: &Setup) {
        let snapshot = self.engine.snapshot();
        let progress = snapshot.banks[0].watch.as_ref().map(|w| w.progress);
        assert!(
            matches!(progress, None | Some(Progress::Watching)),
            "after {} cycles the watch has not learnt: {progress:?}, {setup:?}",
            setup.learn
        );
    }

    fn state(&mut self) -> (Vec<u8>, u64) {
        let mut records = self.engine.checkpoints(self.now()).into_iter();
        let Some(Record::Checkpoint { state, turn, .. }) = records.next() else {
            panic!("a bank that took values in has a checkpoint");
        };
        (state, turn)
    }

    pub fn now(&self) -> Time {
        START.plus_us(self.cycle * US_PER_S)
    }

    /// A value of a source (from 0) in this cycle.
    pub fn measurement(&self, source: usize, value: f64) -> Measurement {
        Measurement {
            bank: BankIx(0),
            source: self.names[source].clone(),
            // 503 is the target of the bank of these tests.
            value: Value::Decimal {
                coefficient: ((503.0 + value) * 1e4).round() as i64,
                exponent: -4,
            },
            taken: Some(self.now()),
            cycle: Some(self.cycle + self.counter),
        }
    }

    /// Hands an event over after the deadlines before it; says whether a notice about level or spread
    /// was raised.
    pub fn handle(&mut self, event: Event) -> bool {
        let now = self.now();
        let mut called = false;
        while let Some(due) = self.engine.next_deadline().filter(|d| *d <= now) {
            let at = due.max(now.plus_us(-US_PER_S));
            let effects = self.engine.handle(Event::Deadline, at);
            called |= self.hear(effects);
        }
        let effects = self.engine.handle(event, now);
        self.hear(effects) | called
    }

    fn hear(&mut self, effects: Vec<Effect>) -> bool {
        let mut called = false;
        for effect in effects {
            let Effect::Keep(Record::Notice(notice)) = effect else {
                continue;
            };
            if !is_finding(notice.kind) {
                continue;
            }
            match self.notices.iter_mut().find(|n| n.id == notice.id) {
                Some(known) => *known = notice,
                None => {
                    self.notices.push(notice);
                    called = true;
                }
            }
        }
        called
    }

    /// A cycle in which only some sources deliver.
    pub fn step_some(&mut self, values: &[f64], present: impl Fn(usize) -> bool) -> bool {
        self.cycle += 1;
        let all = values.iter().enumerate().filter(|(s, _)| present(*s));
        let all = all.map(|(s, v)| self.measurement(s, *v)).collect();
        self.handle(Event::Measurements(all))
    }

    /// Sources (from 0) that open notices name now, in order.
    pub fn named(&self) -> Vec<usize> {
        let active = self.notices.iter().filter(|n| n.state.is_active());
        let named = active.flat_map(|n| n.sources.iter().map(|s| &s.source));
        let place = |name| self.names.iter().position(|n| n == name);
        let mut all: Vec<usize> = named.filter_map(place).collect();
        all.sort_unstable();
        all.dedup();
        all
    }

    /// Whether some notice holds.
    pub fn is_open(&self) -> bool {
        self.notices.iter().any(|n| n.state.is_active())
    }
}

impl Stepper for Rig {
    fn step(&mut self, values: &[f64]) -> bool {
        self.step_some(values, |_| true)
    }
}

/// Whether a kind of notice spends the call budget; silence, clocks and intake are conditions beside it.
fn is_finding(kind: Kind) -> bool {
    matches!(kind, Kind::LevelApart | Kind::SpreadApart | Kind::BankSplit)
}

/// Lets a bank learn. A notice meanwhile would leave a state in which a source is set apart: such a
/// state is thrown away, which with a budget that is never spent hardly ever happens.
fn learn(setup: &Setup, seed: u64) -> Learnt {
    let mut values = Vec::new();
    for attempt in 0..ATTEMPTS {
        let mut feed = Feed::new(setup, seed.wrapping_add(attempt << 32));
        let mut rig = Rig::new(setup);
        for _ in 0..setup.learn {
            feed.cycle(&mut values);
            rig.step(&values);
        }
        if rig.notices.is_empty() {
            rig.check_learnt(setup);
            let (state, turn) = rig.state();
            return Learnt {
                state,
                turn,
                cycle: rig.cycle,
                feed,
            };
        }
    }
    panic!("{ATTEMPTS} times a notice was raised while nothing was wrong: {setup:?}");
}
