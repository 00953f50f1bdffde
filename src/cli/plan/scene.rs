//! The faults that plan tries: who moves, by how much.

use crate::model::Characteristic;

use super::assumed::Assumed;

/// What goes wrong.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Drift {
    /// The level of one source.
    One,
    /// Two sources move apart, one up and one down.
    TwoApart,
    /// The level of half the bank.
    Half,
    /// The spread of one source.
    Erratic,
}

impl Drift {
    /// Its word for programs.
    pub const fn key(self) -> &'static str {
        match self {
            Self::One => "one_source",
            Self::TwoApart => "two_apart",
            Self::Half => "half_the_bank",
            Self::Erratic => "erratic",
        }
    }

    /// What it takes of a bank: the fewest sources for which it is a fault of its own.
    const fn fewest(self) -> usize {
        match self {
            Self::One => 2,
            Self::TwoApart | Self::Erratic => 3,
            Self::Half => 4,
        }
    }
}

/// A fault of a size.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Scene {
    /// What goes wrong.
    pub drift: Drift,
    /// Sds beyond the margin (level), or how many times the spread margin (spread).
    pub beyond: f64,
    /// The difference it makes, in the unit (level), or the ratio of sds (spread).
    pub size: f64,
}

/// Sizes of each fault, in [`Scene::beyond`].
const ONE: [f64; 5] = [0.5, 1.0, 1.5, 2.0, 3.0];
const TWO: [f64; 2] = [1.0, 2.0];
const HALF: [f64; 2] = [0.5, 1.0];
const ERRATIC: [f64; 3] = [1.5, 2.0, 3.0];

impl Scene {
    /// All that are tried on a bank with these margins as configured.
    pub fn all(assumed: &Assumed, margin: f64, spread_margin: f64) -> Vec<Self> {
        let faults: [(Drift, &[f64]); 4] = [
            (Drift::One, &ONE),
            (Drift::TwoApart, &TWO),
            (Drift::Half, &HALF),
            (Drift::Erratic, &ERRATIC),
        ];
        let fit = faults
            .into_iter()
            .filter(|(drift, _)| assumed.sources >= drift.fewest());
        let sizes = fit.flat_map(|(drift, sizes)| sizes.iter().map(move |b| (drift, *b)));
        let scene = |(drift, beyond): (Drift, f64)| Self {
            drift,
            beyond,
            size: match drift {
                Drift::Erratic => beyond * spread_margin,
                _ => margin + beyond * assumed.sd,
            },
        };
        sizes.map(scene).collect()
    }

    /// Whether margins call this a difference at all.
    pub fn matters(&self, margin: f64, spread_margin: f64) -> bool {
        match self.drift {
            Drift::Erratic => self.size > spread_margin,
            _ => self.size > margin,
        }
    }

    /// What it does to the sources of a bank.
    pub fn fault(&self, sources: usize) -> Fault {
        let level = |of: &dyn Fn(usize) -> f64| Fault {
            offsets: (0..sources).map(of).collect(),
            ratios: Vec::new(),
        };
        match self.drift {
            Drift::One => level(&|s| if s == 0 { self.size } else { 0.0 }),
            Drift::Half => level(&|s| if s < sources / 2 { self.size } else { 0.0 }),
            Drift::TwoApart => level(&|s| match s {
                0 => 0.5 * self.size,
                1 => -0.5 * self.size,
                _ => 0.0,
            }),
            Drift::Erratic => Fault {
                offsets: Vec::new(),
                ratios: vec![self.size],
            },
        }
    }

    /// For people ("one source off by 1.30 g").
    pub fn words(&self, what: &Characteristic) -> String {
        let size = || format!("{} {}", what.mean(self.size), what.unit);
        match self.drift {
            Drift::One => format!("one source off by {}", size()),
            Drift::TwoApart => format!("two sources apart by {}", size()),
            Drift::Half => format!("half the bank off by {}", size()),
            Drift::Erratic => format!("one source scatters {} times as much", self.size),
        }
    }

    /// The size again, as the margin sees it.
    pub fn beyond_words(&self) -> String {
        match self.drift {
            Drift::Erratic => format!("{} × spread margin", self.beyond),
            _ => format!("margin + {} sd", self.beyond),
        }
    }
}

/// What a fault does, source by source.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Fault {
    offsets: Vec<f64>,
    ratios: Vec<f64>,
}

impl Fault {
    /// By how much a source is off, in the unit.
    pub fn offset(&self, source: usize) -> f64 {
        self.offsets.get(source).copied().unwrap_or(0.0)
    }

    /// How many times its usual sd a source scatters.
    pub fn ratio(&self, source: usize) -> f64 {
        self.ratios.get(source).copied().unwrap_or(1.0)
    }
}
