//! A small physical model of a gravity filler with parallel heads: what each head put into its pack
//! in each cycle, in tenths of a gram.
//!
//! A tank feeds all heads. Its level and the product's density wander, so all heads move together
//! by far more than they differ from each other. A valve opens for a set time; what leaves follows
//! Torricelli's law; each valve has its own discharge coefficient, which wears; it dribbles after
//! closing; a checkweigher reads in steps of 0.1 g with some noise.
//!
//! What must hold: [`Filler::weigh`] is a function of the seed, the cycle and the head alone, so
//! any cycle can be asked for in any order and a recording can be made again to the last digit.
//! Deliberately absent: clocks, topics, and anything the daemon would compute.

use std::fmt;

/// Heads of the filler.
pub const HEADS: usize = 12;
/// What every head should give, in grams.
pub const TARGET_G: f64 = 503.0;

/// Standard gravity, in m/s².
const GRAVITY: f64 = 9.806_65;
/// Mean height of the product above the nozzles, in metres.
const LEVEL_M: f64 = 0.45;
/// Mean density of the product, in kg/m³ (g/l).
const DENSITY: f64 = 1_035.0;
/// Inner diameter of a nozzle, in metres.
const NOZZLE_M: f64 = 0.022;
/// Discharge coefficient of a new valve; 0.6 to 0.65 is usual for a sharp edge.
const DISCHARGE: f64 = 0.62;
/// What falls after a valve has closed, on average, in grams.
const DRIBBLE_G: f64 = 1.5;
/// Half the width of the dribble's even distribution, in grams (sd 0.5 g).
const DRIBBLE_HALF_WIDTH_G: f64 = 0.866;
/// Standard deviation of a valve's open time, as a share of it (about 1.0 g).
const TIMING_SD: f64 = 0.002_1;
/// Standard deviation of the checkweigher, in grams.
const SCALE_SD_G: f64 = 0.3;
/// Standard deviation of the valves' discharge coefficients after trimming, as a share (about 0.1 g).
const VALVE_SD: f64 = 0.000_2;
/// Most that a valve's coefficient wears off per cycle, as a share: 0.1 g in about 100 000 cycles.
const MOST_WEAR: f64 = 2e-9;

/// How the tank's level wanders: time scale in cycles, standard deviation as a share.
const LEVEL_WANDER: [(u64, f64); 4] = [(8, 0.010), (40, 0.012), (300, 0.006), (2_400, 0.002)];
/// How the density wanders (temperature, batches of product).
const DENSITY_WANDER: [(u64, f64); 2] = [(900, 0.001), (6_000, 0.000_5)];

/// A weight as the checkweigher tells it: whole tenths of a gram, so that its text is exact.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Weight(i64);

impl Weight {
    /// In grams.
    pub fn grams(self) -> f64 {
        self.0 as f64 / 10.0
    }
}

impl fmt::Display for Weight {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let sign = if self.0 < 0 { "-" } else { "" };
        let tenths = self.0.unsigned_abs();
        write!(f, "{sign}{}.{}", tenths / 10, tenths % 10)
    }
}

/// What can be wrong with a head.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Trouble {
    /// Its valve lets through too little or too much: this much at the end of the ramp, in grams.
    Level {
        /// Negative for too little.
        offset_g: f64,
    },
    /// Its valve opens and closes irregularly: the spread of what it gives is multiplied.
    Erratic {
        /// The factor on the standard deviation; 1 or more.
        times: f64,
    },
}

/// A trouble of one head for a time.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Spell {
    /// Which head, from 0.
    pub head: usize,
    /// What is wrong.
    pub trouble: Trouble,
    /// First cycle.
    pub from: u64,
    /// Cycles until it has grown to its full size.
    pub ramp: u64,
    /// First cycle in which it is put right.
    pub until: u64,
}

impl Spell {
    /// How much of the trouble there is in a cycle, from 0 to 1.
    fn share(&self, cycle: u64) -> f64 {
        if cycle < self.from || cycle >= self.until {
            return 0.0;
        }
        let since = (cycle - self.from + 1) as f64;
        (since / self.ramp.max(1) as f64).min(1.0)
    }
}

/// From a cycle on, all heads are set to another target.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Retarget {
    /// First cycle.
    pub from: u64,
    /// The new target, in grams.
    pub target_g: f64,
}

/// The filler.
#[derive(Clone, Debug)]
pub struct Filler {
    seed: u64,
    valves: [Valve; HEADS],
    spells: Vec<Spell>,
    retarget: Option<Retarget>,
    /// Factor on the wander of level and density.
    wander: f64,
}

#[derive(Clone, Copy, Debug, Default)]
struct Valve {
    /// Discharge coefficient after trimming.
    discharge: f64,
    /// Share of it lost per cycle.
    wear: f64,
}

/// Which random number is meant: each stream is independent of the others.
#[derive(Clone, Copy)]
enum Stream {
    Valves,
    Packs,
    Level(usize),
    Density(usize),
}

impl Stream {
    fn number(self) -> u64 {
        match self {
            Self::Valves => 1,
            Self::Packs => 2,
            Self::Level(scale) => 100 + scale as u64,
            Self::Density(scale) => 200 + scale as u64,
        }
    }
}

impl Filler {
    /// A filler in good order; the same seed gives the same filler.
    pub fn new(seed: u64) -> Self {
        let mut valves = [Valve::default(); HEADS];
        for (head, valve) in valves.iter_mut().enumerate() {
            let mut random = random(seed, Stream::Valves, head as u64);
            valve.discharge = DISCHARGE * (1.0 + VALVE_SD * normal(&mut random));
            valve.wear = MOST_WEAR * random.f64();
        }
        Self {
            seed,
            valves,
            spells: Vec::new(),
            retarget: None,
            wander: 1.0,
        }
    }

    /// The same filler with these troubles to come.
    #[must_use]
    pub fn with_spells(mut self, spells: Vec<Spell>) -> Self {
        self.spells = spells;
        self
    }

    /// The same filler, set to another target from some cycle on.
    #[must_use]
    pub fn with_retarget(mut self, retarget: Retarget) -> Self {
        self.retarget = Some(retarget);
        self
    }

    /// The same filler with a tank that wanders `times` as much, or as little.
    #[must_use]
    pub fn with_wander(mut self, times: f64) -> Self {
        self.wander = times;
        self
    }

    /// What each head gives in a cycle, heads in physical order.
    pub fn weigh(&self, cycle: u64) -> [Weight; HEADS] {
        let level = LEVEL_M * (1.0 + self.wander(cycle, &LEVEL_WANDER, Stream::Level));
        let density = DENSITY * (1.0 + self.wander(cycle, &DENSITY_WANDER, Stream::Density));
        let mut random = random(self.seed, Stream::Packs, cycle);
        let mut weights = [Weight(0); HEADS];
        for (head, (weight, valve)) in weights.iter_mut().zip(&self.valves).enumerate() {
            let grams = self.pack(cycle, head, valve, level, density, &mut random);
            *weight = Weight((grams * 10.0).round() as i64);
        }
        weights
    }

    /// What one head gives, before the checkweigher rounds it, in grams.
    fn pack(
        &self,
        cycle: u64,
        head: usize,
        valve: &Valve,
        level: f64,
        density: f64,
        random: &mut fastrand::Rng,
    ) -> f64 {
        let (offset, times) = self.trouble(cycle, head);
        let worn = 1.0 - valve.wear * cycle as f64;
        let discharge = valve.discharge * worn * (1.0 + offset / TARGET_G);
        let open = open_s(self.target(cycle)) * (1.0 + TIMING_SD * normal(random));
        let through = flow(discharge, level, density) * open;
        let steady = flow(discharge, level, density) * open_s(self.target(cycle));
        let dribble = DRIBBLE_G + DRIBBLE_HALF_WIDTH_G * (2.0 * random.f64() - 1.0);
        let scale = SCALE_SD_G * normal(random);
        // An erratic valve scatters in open time and dribble; the checkweigher stays as good as it
        // was, but is so much smaller that the whole may be multiplied.
        let scatter = (through - steady) + (dribble - DRIBBLE_G) + scale;
        steady + DRIBBLE_G + times * scatter
    }

    /// Offset in grams and factor on the spread of a head in a cycle.
    fn trouble(&self, cycle: u64, head: usize) -> (f64, f64) {
        let (mut offset, mut times) = (0.0, 1.0);
        for spell in self.spells.iter().filter(|s| s.head == head) {
            let share = spell.share(cycle);
            match spell.trouble {
                Trouble::Level { offset_g } => offset += offset_g * share,
                Trouble::Erratic { times: most } => times *= 1.0 + (most - 1.0) * share,
            }
        }
        (offset, times)
    }

    fn target(&self, cycle: u64) -> f64 {
        match self.retarget {
            Some(change) if cycle >= change.from => change.target_g,
            _ => TARGET_G,
        }
    }

    /// A relative movement that depends on the cycle alone: random knots, smoothly joined, on
    /// several time scales.
    fn wander(&self, cycle: u64, scales: &[(u64, f64)], stream: fn(usize) -> Stream) -> f64 {
        let knot = |scale: usize, at: u64| normal(&mut random(self.seed, stream(scale), at));
        let of_scale = |(scale, &(length, sd)): (usize, &(u64, f64))| {
            let (at, within) = (cycle / length, (cycle % length) as f64 / length as f64);
            let blend = within * within * (3.0 - 2.0 * within);
            self.wander * sd * (knot(scale, at) * (1.0 - blend) + knot(scale, at + 1) * blend)
        };
        scales.iter().enumerate().map(of_scale).sum()
    }
}

/// Torricelli: speed sqrt(2 g h) through the nozzle, reduced by the discharge coefficient; in g/s.
fn flow(discharge: f64, level_m: f64, density: f64) -> f64 {
    let area = std::f64::consts::PI * NOZZLE_M * NOZZLE_M / 4.0;
    discharge * area * (2.0 * GRAVITY * level_m).sqrt() * density * 1_000.0
}

/// How long a valve opens for a target, in seconds; set once for mean level, density and valve.
fn open_s(target_g: f64) -> f64 {
    (target_g - DRIBBLE_G) / flow(DISCHARGE, LEVEL_M, DENSITY)
}

/// The generator of one random event.
fn random(seed: u64, stream: Stream, at: u64) -> fastrand::Rng {
    let mixed = mix(mix(mix(seed) ^ stream.number()) ^ at);
    fastrand::Rng::with_seed(mixed)
}

/// The finaliser of SplitMix64 (Steele, Lea, Flood 2014): neighbouring numbers become unrelated.
fn mix(number: u64) -> u64 {
    let mut z = number.wrapping_add(0x9e37_79b9_7f4a_7c15);
    z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
    z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
    z ^ (z >> 31)
}

/// A standard normal number (Box and Muller 1958). With `libm`, so that every machine gives the same
/// recording to the last digit.
fn normal(random: &mut fastrand::Rng) -> f64 {
    // 1 - u lies in (0, 1], so the logarithm is finite.
    let radius = (-2.0 * libm::log(1.0 - random.f64())).sqrt();
    radius * libm::cos(std::f64::consts::TAU * random.f64())
}

#[cfg(test)]
mod tests;
