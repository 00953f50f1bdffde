//! Independent runs on two threads, their results in the order of the runs.

use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};

/// The machines that run the tests have two processors.
const THREADS: usize = 2;

/// Does independent runs; `tick` hears of each one that is done.
pub struct Crew<'a> {
    /// For a progress bar.
    pub tick: &'a (dyn Fn() + Sync),
}

impl Crew<'_> {
    /// `f(0)` to `f(runs - 1)`. Which thread does which run changes nothing, since a run depends on its
    /// number alone.
    pub fn each<T: Send>(&self, runs: usize, f: impl Fn(usize) -> T + Sync) -> Vec<T> {
        let next = AtomicUsize::new(0);
        let done: Mutex<Vec<(usize, T)>> = Mutex::new(Vec::with_capacity(runs));
        let work = || {
            loop {
                let run = next.fetch_add(1, Ordering::Relaxed);
                if run >= runs {
                    return;
                }
                let result = f(run);
                done.lock().expect("no run panicked").push((run, result));
                (self.tick)();
            }
        };
        std::thread::scope(|scope| {
            for _ in 1..THREADS {
                scope.spawn(work);
            }
            work();
        });
        let mut all = done.into_inner().expect("no run panicked");
        all.sort_by_key(|(run, _)| *run);
        all.into_iter().map(|(_, result)| result).collect()
    }
}

/// The runs of a row: how many, from which seed, by whom.
#[derive(Clone, Copy)]
pub struct Runs<'a> {
    pub count: usize,
    pub seed: u64,
    pub crew: &'a Crew<'a>,
}

impl Runs<'_> {
    /// `f` of each run's number and seed.
    pub fn each<T: Send>(&self, f: impl Fn(usize, u64) -> T + Sync) -> Vec<T> {
        let seed = |run: usize| self.seed.wrapping_add(run as u64);
        self.crew.each(self.count, |run| f(run, seed(run)))
    }
}
