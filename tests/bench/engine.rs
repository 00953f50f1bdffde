//! How fast the engine is by itself: events in, effects out, watch and looks on, nothing kept or sent.
//!
//!   cargo bench --bench engine
//!
//! One thread, its processor time where the kernel tells it. A cycle a second of plant time, so a look every 1 000 cycles is one every 1 000 s; beside
//! it the daemon's usual look every 30 s, which at 240 sources is a matter of the looks alone and left out. Values are made before the clock starts. Three repetitions, the
//! median is told.

#[path = "../sim/feed.rs"]
mod feed;
#[path = "../common/line.rs"]
mod line;
#[path = "processor.rs"]
mod processor;

use std::sync::Arc;
use std::time::Instant;

use evenrow::engine::{Effect, Engine, Event, Record};
use evenrow::model::{BankIx, Measurement, Name, Time, US_PER_S, Value};
use evenrow::notice::Manners;
use feed::{Feed, Setup};
use line::{START, bank, head};

/// Cycles before the clock starts: windows are full and the watch has learnt.
const LEARN: i64 = 2500;

const REPETITIONS: usize = 3;

/// A bank with its plant.
struct Bench {
    engine: Engine,
    feed: Feed,
    names: Vec<Name>,
    cycle: i64,
    /// Notices told so far.
    notices: usize,
}

impl Bench {
    fn new(k: usize, look_every: i64) -> Self {
        let mut bank = bank(k);
        bank.look_every_us = look_every * US_PER_S;
        Self {
            engine: Engine::new(
                line::plant(Vec::new(), Manners::default()),
                vec![Arc::new(bank)],
            ),
            feed: Feed::new(&Setup::even(k), 1),
            names: (1..=k).map(head).collect(),
            cycle: 0,
            notices: 0,
        }
    }

    /// The turns of so many cycles.
    fn turns(&mut self, cycles: i64) -> Vec<(Time, Event)> {
        let mut values = Vec::new();
        let mut turns = Vec::new();
        for _ in 0..cycles {
            self.cycle += 1;
            self.feed.cycle(&mut values);
            let now = START.plus_us(self.cycle * US_PER_S);
            let measurement = |(name, value): (&Name, &f64)| Measurement {
                bank: BankIx(0),
                source: name.clone(),
                value: Value::Decimal {
                    coefficient: ((503.0 + value) * 10.0).round() as i64,
                    exponent: -1,
                },
                taken: Some(now),
                cycle: Some(self.cycle),
            };
            let all = self.names.iter().zip(&values).map(measurement).collect();
            turns.push((now, Event::Measurements(all)));
        }
        turns
    }

    /// Handles turns and the deadlines between them; seconds of the processor.
    fn handle(&mut self, turns: Vec<(Time, Event)>) -> f64 {
        let (started, before) = (Instant::now(), processor::seconds());
        for (now, event) in turns {
            while let Some(due) = self.engine.next_deadline().filter(|d| *d <= now) {
                let at = due.max(now.plus_us(-US_PER_S));
                let effects = self.engine.handle(Event::Deadline, at);
                self.count(&effects);
            }
            let effects = self.engine.handle(event, now);
            self.count(&effects);
        }
        let wall = started.elapsed().as_secs_f64();
        let spent = processor::seconds().zip(before);
        spent.map_or(wall, |(after, before)| after - before)
    }

    fn count(&mut self, effects: &[Effect]) {
        let notice = |e: &&Effect| matches!(e, Effect::Keep(Record::Notice(_)));
        self.notices += effects.iter().filter(notice).count();
    }

    /// Bytes of the bank's whole state.
    fn state_bytes(&mut self) -> usize {
        let now = START.plus_us(self.cycle * US_PER_S);
        let records = self.engine.checkpoints(now);
        let bytes = records.iter().map(|r| match r {
            Record::Checkpoint { state, .. } => state.len(),
            _ => 0,
        });
        bytes.sum()
    }
}

/// Measurements per second, and the bytes of the state afterwards.
fn speed(k: usize, look_every: i64, cycles: i64) -> (f64, usize) {
    let mut all = Vec::new();
    let mut bytes = 0;
    for _ in 0..REPETITIONS {
        let mut bench = Bench::new(k, look_every);
        let before = bench.turns(LEARN);
        bench.handle(before);
        let turns = bench.turns(cycles);
        let seconds = bench.handle(turns);
        assert_eq!(
            bench.notices, 0,
            "nothing is wrong, and something is called"
        );
        all.push(k as f64 * cycles as f64 / seconds);
        bytes = bench.state_bytes();
    }
    all.sort_by(f64::total_cmp);
    (all[REPETITIONS / 2], bytes)
}

/// The longest turn from the moment when three of 60 sources move until they are called and named.
fn naming_ms() -> f64 {
    let mut all = Vec::new();
    for _ in 0..REPETITIONS {
        let mut bench = Bench::new(60, 30);
        let before = bench.turns(LEARN);
        bench.handle(before);
        for s in 0..3 {
            bench.feed.offsets[s] = 3.0;
        }
        let mut longest: f64 = 0.0;
        while bench.notices == 0 && bench.cycle < LEARN + 1000 {
            let turn = bench.turns(1);
            longest = longest.max(bench.handle(turn));
        }
        assert!(
            bench.notices > 0,
            "three sources moved, and nothing is called"
        );
        all.push(longest * 1e3);
    }
    all.sort_by(f64::total_cmp);
    all[REPETITIONS / 2]
}

fn main() {
    println!(
        "| sources | look every, cycles | measurements/s | µs per measurement | state, bytes per source |"
    );
    println!("| ---: | ---: | ---: | ---: | ---: |");
    let mut linear = Vec::new();
    for (k, look_every, cycles) in [
        (12, 1000, 20_000),
        (60, 1000, 6000),
        (240, 1000, 2000),
        (12, 30, 6000),
        (60, 30, 2000),
    ] {
        let (rate, bytes) = speed(k, look_every, cycles);
        println!(
            "| {k} | {look_every} | {rate:.0} | {:.2} | {} |",
            1e6 / rate,
            bytes / k
        );
        if look_every == 1000 {
            linear.push(1e6 / rate);
        }
    }
    println!(
        "\nµs per measurement, 60 and 240 sources over 12: {:.2} and {:.2} (1 is linear in k).",
        linear[1] / linear[0],
        linear[2] / linear[0]
    );
    println!(
        "The longest turn while three of 60 sources move, up to call and names: {:.1} ms.",
        naming_ms()
    );
}
