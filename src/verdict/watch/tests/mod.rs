//! The watch against brute force and against what it must call, seeded.

mod brute;
mod calls;
mod state;

use super::{Crossing, Cycle, Part, Terms, Watch};
use crate::model::{SourceIx, Time};

/// Splitmix64 (Steele, Lea and Flood 2014): the same noise in every run.
struct Rng(u64);

impl Rng {
    fn with_seed(seed: u64) -> Self {
        Self(seed)
    }

    /// Uniform on [0, 1).
    fn uniform(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        ((z ^ (z >> 31)) >> 11) as f64 / (1_u64 << 53) as f64
    }

    /// One of 0 … n - 1.
    fn below(&mut self, n: usize) -> usize {
        (self.uniform() * n as f64) as usize
    }
}

/// A standard normal number (Marsaglia and Bray 1964).
fn normal(rng: &mut Rng) -> f64 {
    loop {
        let (u, v) = (2.0 * rng.uniform() - 1.0, 2.0 * rng.uniform() - 1.0);
        let s = u * u + v * v;
        if s > 0.0 && s < 1.0 {
            return u * (-2.0 * s.ln() / s).sqrt();
        }
    }
}

/// Terms with a call budget that is far from being used up within a test.
fn terms(margin: f64) -> Terms {
    Terms {
        margin,
        spread_margin: 1.5,
        cycles_per_false_call: 1e6,
        resolution: None,
    }
}

fn watch_of(k: usize, terms: Terms) -> Watch {
    let mut watch = Watch::new(terms);
    (0..k).for_each(|_| watch.add_source());
    watch.compare(&vec![true; k]);
    watch
}

fn step(watch: &mut Watch, place: i64, values: &[f64]) -> Option<Crossing> {
    watch.step(&Cycle {
        place,
        taken: Time::from_us(1_000 * place),
        values,
    })
}

/// A watch and the noise that it is fed with.
struct Bench {
    watch: Watch,
    rng: Rng,
    place: i64,
    k: usize,
}

impl Bench {
    /// A watch of `k` sources that has learnt from even ones.
    fn learnt(k: usize, margin: f64, seed: u64) -> Self {
        let mut bench = Self {
            watch: watch_of(k, terms(margin)),
            rng: Rng::with_seed(seed),
            place: 0,
            k,
        };
        let needed = super::learning::Learner::needed(k);
        assert_eq!(bench.run(needed as usize + 20, |_, z| z), None);
        assert_eq!(bench.watch.progress(), super::Progress::Watching);
        bench
    }

    /// Steps `cycles` times with values made of source and standard normal noise, until something crosses.
    fn run(&mut self, cycles: usize, value: impl Fn(usize, f64) -> f64) -> Option<Crossing> {
        (0..cycles).find_map(|_| {
            let noise: Vec<f64> = (0..self.k).map(|_| normal(&mut self.rng)).collect();
            let values: Vec<f64> = (0..self.k).map(|s| value(s, noise[s])).collect();
            self.place += 1;
            step(&mut self.watch, self.place, &values)
        })
    }
}

fn sources(of: &[u16]) -> Vec<SourceIx> {
    of.iter().map(|s| SourceIx(*s)).collect()
}

fn ratio_of(watch: &Watch, part: Part) -> f64 {
    let readings = watch.readings();
    let found = readings.iter().find(|r| r.part == part);
    found.map_or(0.0, |r| r.ratio)
}
