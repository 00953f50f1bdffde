//! Mutated payloads and topics for every decoder, for as long as is asked.
//!
//!   cd tests/fuzz && cargo run --target-dir ../../target -- [SECONDS] [TARGET] [SEED]
//!
//! Starts from `seeds/` and from the payloads that other libraries wrote (`../fixtures/payloads`), mutates
//! them, and keeps an input that gives an outcome not seen before. It has no instruments in the code, so it finds
//! less than a coverage-guided fuzzer would; it needs only the stable compiler. Checked are: no
//! panic, no more outcomes than the payload has bytes, sources and excerpts that can be shown, finite
//! values. The input of a panic is written to `crash.bin`, and the same number as SEED repeats the run.

mod mutate;
mod targets;

use std::collections::{BTreeMap, HashSet};
use std::sync::Mutex;
use std::time::{Duration, Instant};

use mutate::Mutator;
use targets::Target;

/// What is being tried, for whoever must be told when it panics.
static TRIED: Mutex<(String, Vec<u8>)> = Mutex::new((String::new(), Vec::new()));

/// Inputs kept of each target.
const MOST_KEPT: usize = 5000;

fn main() {
    let mut arguments = std::env::args().skip(1);
    let seconds: u64 = arguments
        .next()
        .and_then(|text| text.parse().ok())
        .unwrap_or(60);
    let only = arguments.next();
    let seed: u64 = arguments
        .next()
        .and_then(|text| text.parse().ok())
        .unwrap_or(1);
    let told = std::panic::take_hook();
    std::panic::set_hook(Box::new(move |info| {
        if let Ok(tried) = TRIED.lock() {
            let (target, input) = &*tried;
            eprintln!("target {target}, input written to crash.bin");
            if let Err(error) = std::fs::write("crash.bin", input) {
                eprintln!("crash.bin cannot be written: {error}");
            }
        }
        told(info);
    }));
    let mut all = targets::targets();
    all.retain(|target| only.as_ref().is_none_or(|name| target.name == name));
    assert!(!all.is_empty(), "there is no such target");
    let each = Duration::from_secs(seconds).div_f64(all.len() as f64);
    for target in &mut all {
        run(target, each, seed);
    }
}

fn run(target: &mut Target, time: Duration, seed: u64) {
    let mut corpus = target.seeds.clone();
    let seeds = corpus.len();
    let mut mutator = Mutator::new(seed);
    let mut outcomes: BTreeMap<String, u64> = BTreeMap::new();
    let mut seen = HashSet::new();
    let (started, mut tried) = (Instant::now(), 0_u64);
    while started.elapsed() < time {
        // The seeds themselves first.
        let input = match usize::try_from(tried).ok().filter(|n| *n < seeds) {
            Some(n) => corpus[n].clone(),
            None => mutator.mutated(&corpus),
        };
        if let Ok(mut trying) = TRIED.lock() {
            trying.0.clear();
            trying.0.push_str(target.name);
            trying.1.clone_from(&input);
        }
        let outcome = target.judge(&input);
        tried += 1;
        if seen.insert(outcome.clone()) && corpus.len() < MOST_KEPT {
            corpus.push(input);
        }
        *outcomes
            .entry(outcome.split(' ').next().unwrap_or_default().to_owned())
            .or_default() += 1;
    }
    let (kept, kinds) = (corpus.len() - seeds, seen.len());
    println!(
        "{}: {tried} inputs from {seeds} seeds, {kinds} outcomes, {kept} kept; {outcomes:?}",
        target.name
    );
}
