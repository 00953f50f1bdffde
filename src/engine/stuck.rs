//! A source that repeats one value beyond chance.
//!
//! How often neighbouring values are equal follows from resolution and noise, and the other sources of
//! the bank show it: they, the source's own past and the same stretch of time say how probable one
//! repeat is (the largest of the three counts, each with the rule of three or of Laplace so that nothing
//! seen is never "impossible"). A run of r equal values then has a probability of p^(r−1). A bank that is
//! quiet as a whole has a p near 1, and cries no wolf. Source: own derivation, checked by simulation in
//! the tests of `engine`.

use crate::model::{SourceIx, Time};
use crate::window::{Ring, Windows};

/// A run is beyond chance below this probability: with 60 sources and a value a second one false run in
/// some decades, if repeats are independent.
const CHANCE: f64 = 1e-9;

/// A source that was stuck is so still while it has repeated its value this often.
pub const STILL: usize = 3;

/// The newest values of a source, as long as they are equal.
pub struct Run {
    pub source: SourceIx,
    /// The value less the bank's origin.
    pub offset: f64,
    pub times: usize,
    /// When the first of them was taken.
    pub since: Time,
    pub is_beyond_chance: bool,
}

/// Equal neighbours, and all.
#[derive(Clone, Copy, Default)]
struct Pairs {
    equal: f64,
    all: f64,
}

impl Pairs {
    fn of(offsets: impl Iterator<Item = f64>) -> Self {
        let mut pairs = Self::default();
        let mut last: Option<f64> = None;
        for offset in offsets {
            if let Some(last) = last {
                pairs.all += 1.0;
                pairs.equal += f64::from(u8::from(last == offset));
            }
            last = Some(offset);
        }
        pairs
    }

    fn plus(self, other: Self) -> Self {
        Self {
            equal: self.equal + other.equal,
            all: self.all + other.all,
        }
    }
}

fn newest(ring: &Ring) -> impl Iterator<Item = f64> {
    ring.iter().rev().map(|e| e.offset)
}

/// The run of every one of these sources.
pub fn runs(windows: &Windows, who: &[SourceIx]) -> Vec<Run> {
    let whole: Vec<Pairs> = who
        .iter()
        .map(|s| Pairs::of(newest(windows.ring(*s))))
        .collect();
    let one = |(i, &source): (usize, &SourceIx)| {
        let ring = windows.ring(source);
        let last = ring.newest()?;
        let run = ring.iter().rev().take_while(|e| e.offset == last.offset);
        let (times, since) = run.fold((0, last.taken), |(n, _), e| (n + 1, e.taken));
        let others = || (0..who.len()).filter(move |j| *j != i);
        let is_beyond_chance = times > STILL && who.len() > 1 && {
            let siblings = others().map(|j| whole[j]);
            let lately = others().map(|j| Pairs::of(newest(windows.ring(who[j])).take(times)));
            let own = Pairs::of(newest(ring).skip(times));
            let p = chance(
                siblings.fold(Pairs::default(), Pairs::plus),
                lately.fold(Pairs::default(), Pairs::plus),
                own,
            );
            (times - 1) as f64 * p.ln() < CHANCE.ln()
        };
        Some(Run {
            source,
            offset: last.offset,
            times,
            since,
            is_beyond_chance,
        })
    };
    who.iter().enumerate().filter_map(one).collect()
}

/// How probable it is, at most, that a value repeats the one before.
fn chance(siblings: Pairs, lately: Pairs, own: Pairs) -> f64 {
    let laplace = |p: Pairs| (p.equal + 1.0) / (p.all + 2.0);
    let three = (siblings.equal + 3.0) / (siblings.all + 3.0);
    three.max(laplace(lately)).max(laplace(own))
}
