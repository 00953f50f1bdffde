//! Measurements of a bank as plan makes them: normal noise with the sds and the correlation that were
//! assumed, faults put on, read by an instrument of the bank's resolution.
//!
//! Everything follows from a seed. Deliberately absent: movement that all sources share. Banks that pair
//! take it out within the cycle; for others it is said beside the figures that it is not in them.

use std::f64::consts::TAU;

use super::assumed::Assumed;
use super::scene::Fault;

/// Independent standard normal values (Box and Muller 1958), both of each pair.
#[derive(Clone)]
struct Normal {
    random: fastrand::Rng,
    other: Option<f64>,
}

impl Normal {
    fn next(&mut self) -> f64 {
        if let Some(other) = self.other.take() {
            return other;
        }
        let size = (-2.0 * (1.0 - self.random.f64()).ln()).sqrt();
        let (sine, cosine) = (TAU * self.random.f64()).sin_cos();
        self.other = Some(size * sine);
        size * cosine
    }
}

/// Makes cycle after cycle.
#[derive(Clone)]
pub struct Noise {
    normal: Normal,
    sds: Vec<f64>,
    phi: f64,
    /// Step of the instrument; 0 where it is unknown.
    step: f64,
    /// The noise of the cycle before, in sds.
    last: Vec<f64>,
}

impl Noise {
    /// From what was assumed of a bank.
    pub fn new(assumed: &Assumed, resolution: Option<f64>, seed: u64) -> Self {
        let mut normal = Normal {
            random: fastrand::Rng::with_seed(seed),
            other: None,
        };
        let sds = assumed.sds();
        Self {
            last: sds.iter().map(|_| normal.next()).collect(),
            phi: assumed.phi.clamp(0.0, 0.99),
            step: resolution.unwrap_or(0.0),
            sds,
            normal,
        }
    }

    /// Goes on by another seed.
    pub fn reseed(&mut self, seed: u64) {
        self.normal = Normal {
            random: fastrand::Rng::with_seed(seed),
            other: None,
        };
    }

    /// The next value of every source.
    pub fn next(&mut self, fault: &Fault, values: &mut Vec<f64>) {
        let fresh = (1.0 - self.phi * self.phi).sqrt();
        // Where a value stands between two steps of the instrument is chance.
        let between = self.step * self.normal.random.f64();
        values.clear();
        for source in 0..self.sds.len() {
            let z = self.phi * self.last[source] + fresh * self.normal.next();
            self.last[source] = z;
            let exact = between + fault.offset(source) + fault.ratio(source) * self.sds[source] * z;
            values.push(if self.step > 0.0 {
                (exact / self.step).round() * self.step
            } else {
                exact
            });
        }
    }
}
