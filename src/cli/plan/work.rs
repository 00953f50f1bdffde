//! All faults under all settings, on two threads. What comes out depends on the seed alone, whichever
//! thread is done first.

use std::sync::Mutex;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::thread;

use crate::model::Bank;

use super::assumed::Assumed;
use super::looks::{Windowed, with_next_span};
use super::outcome::Outcome;
use super::scene::Scene;
use super::setting::Setting;
use super::trial::Trials;

/// Threads at work; a plant's small machine has two, and somebody else may be using one.
const THREADS: usize = 2;
/// Makes the same figures come out each time.
const SEED: u64 = 0x0065_7665_6e72_6f77;

/// One fault under one setting.
#[derive(Clone, Debug)]
pub struct Tried {
    /// The fault.
    pub scene: Scene,
    /// What came of it; `None` where the setting's margins call it no difference.
    pub outcome: Option<Outcome>,
}

/// One setting with all faults.
#[derive(Clone, Debug)]
pub struct Judged {
    /// The setting.
    pub setting: Setting,
    /// Mean number of cycles to a false call that the budget allows; `None` where looks decide.
    pub cycles_per_false_call: Option<f64>,
    /// The faults, in their order.
    pub tried: Vec<Tried>,
}

/// The watch cannot decide for this bank.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct NeverLearns;

/// How many steps [`judge`] tells.
pub fn steps(settings: &[Setting], scenes: &[Scene]) -> u64 {
    (settings.len() * scenes.len()) as u64
}

/// Tries every scene under every setting; `tick` hears of each step done.
///
/// # Errors
/// When the watch never learns on such values.
pub fn judge(
    assumed: &Assumed,
    settings: &[Setting],
    scenes: &[Scene],
    tick: &(dyn Fn() + Sync),
) -> Result<Vec<Judged>, NeverLearns> {
    let paired = settings.iter().all(|s| s.bank.pairing.is_paired());
    if paired {
        by_watch(assumed, settings, scenes, tick)
    } else {
        Ok(by_looks(assumed, settings, scenes, tick))
    }
}

fn by_watch(
    assumed: &Assumed,
    settings: &[Setting],
    scenes: &[Scene],
    tick: &(dyn Fn() + Sync),
) -> Result<Vec<Judged>, NeverLearns> {
    let ready = spread_out(settings.len(), |s| {
        Trials::new(assumed, &settings[s].bank, SEED)
    });
    let ready: Option<Vec<Trials>> = ready.into_iter().collect();
    let ready = ready.ok_or(NeverLearns)?;
    let outcomes = spread_out(settings.len() * scenes.len(), |cell| {
        let (s, c) = (cell / scenes.len(), cell % scenes.len());
        let bank = &settings[s].bank;
        let scene = &scenes[c];
        let matters = scene.matters(bank.margin, bank.spread_margin);
        // The same noise for a scene under all settings: they differ by nothing else.
        let outcome = matters.then(|| ready[s].of(scene, seed_of(c)));
        tick();
        outcome
    });
    let cycles = |s: usize| Some(ready[s].cycles_per_false_call);
    Ok(gather(settings, scenes, outcomes, cycles))
}

fn by_looks(
    assumed: &Assumed,
    settings: &[Setting],
    scenes: &[Scene],
    tick: &(dyn Fn() + Sync),
) -> Vec<Judged> {
    // Settings that differ by budget or spans alone share their windows.
    let first_alike = |s: usize| {
        let margin = settings[s].bank.margin;
        let same = settings.iter().position(|o| o.bank.margin == margin);
        same.unwrap_or(s)
    };
    let firsts: Vec<usize> = (0..settings.len())
        .filter(|s| first_alike(*s) == *s)
        .collect();
    let windowed = spread_out(firsts.len() * scenes.len(), |cell| {
        let (f, c) = (cell / scenes.len(), cell % scenes.len());
        let bank: Bank = with_next_span(&settings[firsts[f]].bank);
        let scene = &scenes[c];
        let matters = scene.matters(bank.margin, bank.spread_margin);
        let done = matters.then(|| Windowed::of(assumed, &bank, scene, seed_of(c)));
        (0..settings.len())
            .filter(|s| first_alike(*s) == firsts[f])
            .for_each(|_| tick());
        done
    });
    let outcome = |cell: usize| {
        let (s, c) = (cell / scenes.len(), cell % scenes.len());
        let f = firsts.iter().position(|f| *f == first_alike(s))?;
        let windows = windowed[f * scenes.len() + c].as_ref()?;
        Some(windows.outcome(assumed, &settings[s].bank))
    };
    let outcomes = (0..settings.len() * scenes.len()).map(outcome).collect();
    gather(settings, scenes, outcomes, |_| None)
}

fn seed_of(scene: usize) -> u64 {
    SEED.wrapping_add(1_000_003 * (scene as u64 + 1))
}

fn gather(
    settings: &[Setting],
    scenes: &[Scene],
    outcomes: Vec<Option<Outcome>>,
    cycles: impl Fn(usize) -> Option<f64>,
) -> Vec<Judged> {
    let mut outcomes = outcomes.into_iter();
    let one = |(s, setting): (usize, &Setting)| {
        let tried = scenes.iter().zip(&mut outcomes);
        Judged {
            setting: setting.clone(),
            cycles_per_false_call: cycles(s),
            tried: tried
                .map(|(scene, outcome)| Tried {
                    scene: *scene,
                    outcome,
                })
                .collect(),
        }
    };
    settings.iter().enumerate().map(one).collect()
}

/// Does `count` pieces of work on the threads and gives the results in their order.
fn spread_out<T: Send>(count: usize, piece: impl Fn(usize) -> T + Sync) -> Vec<T> {
    let next = AtomicUsize::new(0);
    let done: Mutex<Vec<(usize, T)>> = Mutex::new(Vec::with_capacity(count));
    thread::scope(|scope| {
        for _ in 0..THREADS.min(count) {
            scope.spawn(|| {
                loop {
                    let at = next.fetch_add(1, Ordering::Relaxed);
                    if at >= count {
                        break;
                    }
                    let result = piece(at);
                    let mut done = done
                        .lock()
                        .unwrap_or_else(std::sync::PoisonError::into_inner);
                    done.push((at, result));
                }
            });
        }
    });
    let mut done = done
        .into_inner()
        .unwrap_or_else(std::sync::PoisonError::into_inner);
    done.sort_by_key(|(at, _)| *at);
    done.into_iter().map(|(_, result)| result).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn work_comes_back_in_its_order() {
        let squares = spread_out(100, |n| n * n);
        let wanted: Vec<usize> = (0..100).map(|n| n * n).collect();
        assert_eq!(squares, wanted);
        assert!(spread_out(0, |n| n).is_empty());
    }
}
