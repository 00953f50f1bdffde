//! A simulated line for tests of the engine: sources that share a wandering cycle, with faults put in.
//! Every value follows from the seed; the numbers are invented.

#![allow(dead_code, reason = "each test target uses its own part")]

use std::sync::Arc;

use evenrow::engine::{Effect, Engine, Event, Plant, Record};
use evenrow::model::{
    Bank, BankIx, Budget, Characteristic, Layout, Measurement, Name, Offsets, Pairing, Sources,
    Time, US_PER_S, Value,
};
use evenrow::notice::{Kind, Manners, Notice, Route};

pub const START: Time = Time::from_us(1_790_000_000 * US_PER_S);

/// The usual bank of these tests: twelve heads, one cycle a second, noise of 1 g.
pub fn bank(k: usize) -> Bank {
    Bank {
        name: "filler-2".into(),
        equipment: None,
        characteristic: Characteristic {
            name: "net content".into(),
            unit: "g".into(),
            resolution: Some(0.1),
            target: Some(Value::parse("503").expect("a number")),
            declared: Some(Value::parse("500").expect("a number")),
            lower: None,
            upper: None,
        },
        sources: Sources::Listed((1..=k).map(head).collect()),
        pairing: Pairing::Cycle,
        spans: vec![10, 40, 160, 640],
        look_every_us: 30 * US_PER_S,
        margin: 0.5,
        spread_margin: 1.5,
        budget: Budget::new(1.0, 90.0).expect("a budget"),
        wait_cycles: 3,
        silent_after_us: None,
        oldest_us: 30 * 86_400 * US_PER_S,
        layout: Layout::Row,
        groups: Vec::new(),
        cost_per_unit: None,
        reference: None,
        offsets: Offsets::None,
    }
}

/// The plant of these tests, with these ways out.
pub fn plant(routes: Vec<Route>, manners: Manners) -> Plant {
    Plant {
        name: "Quayside".into(),
        zone: jiff::tz::TimeZone::UTC,
        pages: "http://127.0.0.1:7310".into(),
        routes,
        manners,
    }
}

pub fn head(number: usize) -> Name {
    format!("{number:02}").into()
}

/// Independent standard normal values from a seed (Box and Muller 1958).
pub struct Normal(fastrand::Rng);

impl Normal {
    pub fn new(seed: u64) -> Self {
        Self(fastrand::Rng::with_seed(seed))
    }

    pub fn next(&mut self) -> f64 {
        let u = 1.0 - self.0.f64();
        let angle = std::f64::consts::TAU * self.0.f64();
        (-2.0 * u.ln()).sqrt() * angle.cos()
    }
}

/// Runs a bank on simulated cycles, one a second.
pub struct Line {
    pub engine: Engine,
    pub k: usize,
    pub cycle: i64,
    pub noise: Normal,
    pub common: f64,
    /// Step of the random walk that all sources share.
    pub common_step: f64,
    pub resolution: f64,
    /// Sources, from 1, that deliver nothing.
    pub absent: Vec<usize>,
    /// A source, from 1, whose clock is ahead by so many microseconds.
    pub ahead: Option<(usize, i64)>,
    /// What the sources give on average.
    pub level: f64,
    /// Everything the engine wanted done.
    pub effects: Vec<Effect>,
}

impl Line {
    pub fn new(bank: Bank, seed: u64) -> Self {
        Self::of(bank, seed, Vec::new(), Manners::default())
    }

    /// A line of a plant with other manners.
    pub fn with(bank: Bank, seed: u64, change: impl FnOnce(&mut Manners)) -> Self {
        let mut manners = Manners::default();
        change(&mut manners);
        Self::of(bank, seed, Vec::new(), manners)
    }

    /// One whose notices go to outlets too.
    pub fn with_routes(bank: Bank, seed: u64, routes: Vec<Route>) -> Self {
        Self::of(bank, seed, routes, Manners::default())
    }

    fn of(bank: Bank, seed: u64, routes: Vec<Route>, manners: Manners) -> Self {
        let k = match &bank.sources {
            Sources::Listed(listed) => listed.len(),
            Sources::Discover { most } => usize::from(*most),
            Sources::Shifts(calendar) => calendar.names().len(),
        };
        Self {
            engine: Engine::new(plant(routes, manners), vec![Arc::new(bank)]),
            k,
            cycle: 0,
            noise: Normal::new(seed),
            common: 0.0,
            common_step: 0.3,
            resolution: 0.1,
            absent: Vec::new(),
            ahead: None,
            level: 503.0,
            effects: Vec::new(),
        }
    }

    pub fn now(&self) -> Time {
        START.plus_us(self.cycle * US_PER_S)
    }

    /// Runs `cycles` cycles; `fault` gives a source's (offset, sd) at a cycle counted from now.
    pub fn run(&mut self, cycles: i64, fault: impl Fn(usize, i64) -> (f64, f64)) {
        for c in 0..cycles {
            self.cycle += 1;
            self.common += self.common_step * self.noise.next();
            let all = (0..self.k).map(|s| {
                let (offset, sd) = fault(s + 1, c);
                let value = self.level + self.common + offset + sd * self.noise.next();
                self.measurement(s, value)
            });
            let all: Vec<Measurement> = all.collect();
            let all = all.into_iter().enumerate();
            let present = all.filter(|(s, _)| !self.absent.contains(&(s + 1)));
            let all = present.map(|(_, m)| m).collect();
            self.handle(Event::Measurements(all));
        }
    }

    fn measurement(&self, source: usize, value: f64) -> Measurement {
        let ahead = self.ahead.filter(|(s, _)| *s == source + 1);
        let ahead_us = ahead.map_or(0, |(_, us)| us);
        let rounded = (value / self.resolution).round() * self.resolution;
        Measurement {
            bank: BankIx(0),
            source: head(source + 1),
            value: Value::parse(&format!("{rounded:.3}")).expect("a number"),
            taken: Some(self.now().plus_us(ahead_us)),
            cycle: Some(self.cycle),
        }
    }

    /// A measurement of the first source with this cycle number.
    pub fn wrong_cycle(&mut self, cycle: i64) {
        let wrong = Measurement {
            cycle: Some(cycle),
            ..self.measurement(0, 503.0)
        };
        self.handle(Event::Measurements(vec![wrong]));
    }

    /// Measurements taken in so far.
    pub fn accepted(&mut self) -> u64 {
        let snapshot = self.engine.snapshot();
        snapshot.banks[0]
            .outcomes
            .get("accepted")
            .copied()
            .unwrap_or(0)
    }

    pub fn handle(&mut self, event: Event) {
        let now = self.now();
        while let Some(due) = self.engine.next_deadline().filter(|d| *d <= now) {
            let effects = self
                .engine
                .handle(Event::Deadline, due.max(now.plus_us(-US_PER_S)));
            self.effects.extend(effects);
        }
        let effects = self.engine.handle(event, now);
        self.effects.extend(effects);
    }

    /// Every notice that is a call as it was kept, in order.
    pub fn notices(&self) -> Vec<Arc<Notice>> {
        self.kept().filter(|n| n.kind.is_call()).collect()
    }

    /// Every notice of a condition of this kind as it was kept, in order.
    pub fn conditions(&self, kind: Kind) -> Vec<Arc<Notice>> {
        self.kept().filter(|n| n.kind == kind).collect()
    }

    fn kept(&self) -> impl Iterator<Item = Arc<Notice>> {
        self.effects.iter().filter_map(|e| match e {
            Effect::Keep(Record::Notice(n)) => Some(n.clone()),
            _ => None,
        })
    }

    /// The ids of the calls that were raised.
    pub fn raised(&self) -> Vec<Name> {
        let mut ids: Vec<Name> = self.notices().iter().map(|n| n.id.clone()).collect();
        ids.dedup();
        ids.sort();
        ids.dedup();
        ids
    }
}

/// No fault at all.
pub fn even(_: usize, _: i64) -> (f64, f64) {
    (0.0, 1.0)
}
