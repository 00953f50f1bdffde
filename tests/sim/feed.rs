//! Simulated values of a bank: noise of several shapes, common movement, lasting offsets, rounding.
//!
//! The unit is the noise's standard deviation. Every value follows from the seed.

#![allow(dead_code, reason = "the benchmark of the engine uses a part")]

use evenrow::model::Pairing;

/// Shape of the noise, always with mean 0 and standard deviation 1 (outliers aside).
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Noise {
    Normal,
    /// Student's t with 3 degrees of freedom.
    T3,
    /// Exponential of a normal with standard deviation 0.5: skewness 1.75.
    Lognormal,
    /// Normal; this share of the values lies 10 sd off, either way.
    Outliers(f64),
}

/// A bank, its plant, and how it is watched.
#[derive(Clone, Debug)]
pub struct Setup {
    pub k: usize,
    pub noise: Noise,
    /// Lag-one correlation of each source's noise (normal noise only).
    pub phi: f64,
    /// Step of the random walk that all sources share.
    pub walk: f64,
    /// Values are rounded to this; 0 means to 0.0001.
    pub resolution: f64,
    /// Lasting offsets; empty means none.
    pub offsets: Vec<f64>,
    /// Standard deviations; empty means 1.
    pub sds: Vec<f64>,
    pub margin: f64,
    pub spread_margin: f64,
    /// Cycles per false call that the budget allows.
    pub arl0: f64,
    /// Cycles between looks.
    pub look_every: i64,
    /// Cycles before anything is judged.
    pub learn: i64,
    pub pairing: Pairing,
}

impl Setup {
    /// `k` sources with normal noise and nothing wrong, watched without margin.
    pub fn even(k: usize) -> Self {
        Self {
            k,
            noise: Noise::Normal,
            phi: 0.0,
            walk: 0.3,
            resolution: 0.0,
            offsets: Vec::new(),
            sds: Vec::new(),
            margin: 0.0,
            spread_margin: 1.5,
            arl0: 50_000.0,
            look_every: 1000,
            // Sigma is learnt from cycles times k - 1.
            learn: 2500.max(7500 / (k.max(2) as i64 - 1)),
            pairing: Pairing::Cycle,
        }
    }
}

/// What delivers the values.
#[derive(Clone)]
pub struct Feed {
    pub offsets: Vec<f64>,
    pub sds: Vec<f64>,
    noise: Noise,
    phi: f64,
    walk: f64,
    resolution: f64,
    common: f64,
    last: Vec<f64>,
    rng: fastrand::Rng,
    spare: Option<f64>,
}

impl Feed {
    pub fn new(setup: &Setup, seed: u64) -> Self {
        let filled = |given: &[f64], with: f64| {
            let mut all = given.to_vec();
            all.resize(setup.k, with);
            all
        };
        let mut feed = Self {
            offsets: filled(&setup.offsets, 0.0),
            sds: filled(&setup.sds, 1.0),
            noise: setup.noise,
            phi: setup.phi,
            walk: setup.walk,
            resolution: if setup.resolution > 0.0 {
                setup.resolution
            } else {
                1e-4
            },
            common: 0.0,
            last: Vec::new(),
            rng: fastrand::Rng::with_seed(seed),
            spare: None,
        };
        feed.last = (0..setup.k).map(|_| feed.normal()).collect();
        feed
    }

    /// The same plant with other chances from here on.
    pub fn reseed(&mut self, seed: u64) {
        self.rng = fastrand::Rng::with_seed(seed);
        self.spare = None;
    }

    /// Independent standard normal values, summing to zero and then of length 1: a direction in which a
    /// bank can come apart.
    pub fn direction(&mut self, k: usize) -> Vec<f64> {
        let mut all: Vec<f64> = (0..k).map(|_| self.normal()).collect();
        let mean = all.iter().sum::<f64>() / k as f64;
        let length = all.iter().map(|x| (x - mean).powi(2)).sum::<f64>().sqrt();
        for x in &mut all {
            *x = (*x - mean) / length;
        }
        all
    }

    /// A whole number below `n`.
    pub fn below(&mut self, n: i64) -> i64 {
        self.rng.i64(0..n.max(1))
    }

    /// One more source, like the others.
    pub fn add_source(&mut self) {
        self.offsets.push(0.0);
        self.sds.push(1.0);
        let first = self.normal();
        self.last.push(first);
    }

    /// Moves all sources together, for good.
    pub fn shift_common(&mut self, by: f64) {
        self.common += by;
    }

    /// Standard normal, by pairs (Box and Muller 1958).
    fn normal(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        let radius = (-2.0 * (1.0 - self.rng.f64()).ln()).sqrt();
        let (sin, cos) = (std::f64::consts::TAU * self.rng.f64()).sin_cos();
        self.spare = Some(radius * sin);
        radius * cos
    }

    fn noise(&mut self, source: usize) -> f64 {
        match self.noise {
            Noise::Normal if self.phi > 0.0 => {
                let fresh = (1.0 - self.phi * self.phi).sqrt() * self.normal();
                self.last[source] = self.phi * self.last[source] + fresh;
                self.last[source]
            }
            Noise::Normal => self.normal(),
            Noise::T3 => {
                let squares: f64 = (0..3).map(|_| self.normal().powi(2)).sum();
                // Its variance is 3.
                self.normal() / (squares / 3.0).sqrt() / 3.0_f64.sqrt()
            }
            Noise::Lognormal => {
                let s: f64 = 0.5;
                let mean = (s * s / 2.0).exp();
                let sd = mean * ((s * s).exp() - 1.0).sqrt();
                ((s * self.normal()).exp() - mean) / sd
            }
            Noise::Outliers(share) => {
                let sign = if self.rng.bool() { 10.0 } else { -10.0 };
                let far = if self.rng.f64() < share { sign } else { 0.0 };
                far + self.normal()
            }
        }
    }

    /// The next value of every source, in place of what `values` holds.
    pub fn cycle(&mut self, values: &mut Vec<f64>) {
        self.common += self.walk * self.normal();
        values.clear();
        for s in 0..self.offsets.len() {
            let value = self.common + self.offsets[s] + self.sds[s] * self.noise(s);
            values.push((value / self.resolution).round() * self.resolution);
        }
    }
}
