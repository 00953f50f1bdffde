//! One cause for many: whether the machine's own geometry explains how its sources stand apart.
//!
//! A bowl that is not level gives one wave around a ring, a pressure drop a slope along a row, two
//! supply lines split odd from even or half from half, and a shared part moves its own group. Each is
//! a planned contrast over the physical order (listed sources only), and the family is paid for by
//! Holm. A pattern is named when its contrast is significant beyond the margin, what remains without it
//! is even, and it explains the sources with less than naming them one by one would take.
//!
//! Deliberately absent: two patterns at once, and naming sources.

use serde::{Deserialize, Serialize};

use crate::model::{Bank, Group, Layout, Name, Sources};
use crate::stats::{self, dist};

use super::contrast::{Contrast, Fit};
use super::even::Means;
use super::level::Level;
use super::look::Estimate;
use super::parsimony::{
    DECISIVELY, EVEN_ABOVE, PER_PARAMETER, choice, nobodys_variance, one_by_one, squares,
};

/// Family-wise error rate of the contrasts.
const ALPHA: f64 = 0.01;

/// Fewer sources show no pattern that naming them would not show better: of four, one that moved passed
/// for a slope in one case of nine (simulated).
const FEWEST: usize = 6;

/// The forms of a pattern.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum PatternKind {
    /// One wave around a ring; the effect is its amplitude, half the distance from top to bottom.
    Wave {
        /// The source it peaks at.
        highest: Name,
        /// The source opposite.
        lowest: Name,
    },
    /// A slope along a row; the effect is the last place less the first.
    Slope {
        /// The first place.
        first: Name,
        /// The last place.
        last: Name,
    },
    /// The effect is the mean of the odd places less that of the even ones.
    OddFromEven,
    /// The effect is the mean of the first half less that of the second.
    HalfFromHalf {
        /// The last source of the first half.
        first_ends: Name,
        /// The first source of the second half.
        second_begins: Name,
    },
    /// The effect is the mean of the group less that of the rest.
    Group {
        /// The configured group.
        name: Name,
    },
}

impl PatternKind {
    /// The word in interfaces.
    pub const fn word(&self) -> &'static str {
        match self {
            Self::Wave { .. } => "wave",
            Self::Slope { .. } => "slope",
            Self::OddFromEven => "odd_from_even",
            Self::HalfFromHalf { .. } => "half_from_half",
            Self::Group { .. } => "group",
        }
    }

    /// Where a wave is highest.
    pub fn highest(&self) -> Option<&Name> {
        match self {
            Self::Wave { highest, .. } => Some(highest),
            _ => None,
        }
    }

    /// The configured group.
    pub fn group(&self) -> Option<&Name> {
        match self {
            Self::Group { name } => Some(name),
            _ => None,
        }
    }
}

/// A pattern that explains how the sources stand apart.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Pattern {
    /// Which.
    pub kind: PatternKind,
    /// Its size in the unit, as its kind says, with the interval that holds for all patterns tried at
    /// 95 %.
    pub effect: Estimate,
    /// Probability of as large a one by chance, Holm's adjustment included.
    pub p: f64,
    /// What it is, for people, without its size: "one wave around the ring, highest at 07".
    pub words: String,
}

/// The machine as patterns see it.
#[derive(Clone, Copy, Debug)]
pub struct Machine<'a> {
    /// The sources in physical order.
    pub listed: &'a [Name],
    /// Whether the last stands beside the first.
    pub layout: Layout,
    /// Sources that share a part.
    pub groups: &'a [Group],
    /// The largest difference between two sources that does not matter, in the unit.
    pub margin: f64,
}

impl<'a> Machine<'a> {
    /// The machine of a bank; `None` where the physical order is not known.
    pub fn of(bank: &'a Bank) -> Option<Self> {
        let Sources::Listed(listed) = &bank.sources else {
            return None;
        };
        Some(Self {
            listed,
            layout: bank.layout,
            groups: &bank.groups,
            margin: bank.margin,
        })
    }
}

/// The pattern that explains `level`, judged on the values since the start of what was called. `names`
/// are those of the level's sources.
pub fn find(level: &Level, names: &[Name], machine: &Machine) -> Option<Pattern> {
    if names.len() < FEWEST || names.len() != level.means.len() {
        return None;
    }
    let place = |name: &Name| machine.listed.iter().position(|l| l == name);
    let places: Vec<usize> = names.iter().map(place).collect::<Option<_>>()?;
    let tried: Vec<Tried> = contrasts(&places, names, machine)
        .into_iter()
        .filter_map(|(shape, contrast)| Tried::new(shape, &contrast, level, machine.margin))
        .collect();
    let p = stats::holm(&tried.iter().map(|t| t.fit.p).collect::<Vec<f64>>());
    let family = tried.len();
    let best = tried
        .iter()
        .zip(p)
        .filter(|(_, p)| *p < ALPHA)
        .min_by(|a, b| a.0.score.total_cmp(&b.0.score))?;
    let (tried, p) = best;
    let score = tried.score + choice(family) + DECISIVELY;
    let variance = nobodys_variance(level, machine.margin);
    let explains =
        score < one_by_one(&level.means, variance) && is_even(level, &tried.fit, machine);
    explains.then(|| tried.told(p, family, machine))?
}

/// A form with what it needs to be told.
#[derive(Clone, Copy)]
enum Shape<'a> {
    Wave,
    Slope,
    OddFromEven,
    HalfFromHalf,
    Group(&'a Group),
}

/// Every contrast that the machine allows. Groups come first: of two that say the same, the
/// configured one says more.
fn contrasts<'a>(
    places: &[usize],
    names: &[Name],
    machine: &Machine<'a>,
) -> Vec<(Shape<'a>, Contrast)> {
    let size = machine.listed.len();
    let mut all = Vec::new();
    let mut split = |shape, inside: Vec<bool>| {
        let members = inside.iter().filter(|i| **i).count();
        // One source from the rest is a name, not a pattern.
        if members >= 2 && members + 2 <= inside.len() {
            all.push((shape, Contrast::split(&inside)));
        }
    };
    for group in machine.groups {
        let inside = names.iter().map(|n| group.members.contains(n)).collect();
        split(Shape::Group(group), inside);
    }
    let odd = places.iter().map(|p| p % 2 == 0).collect();
    split(Shape::OddFromEven, odd);
    let first = places.iter().map(|p| *p < size.div_ceil(2)).collect();
    split(Shape::HalfFromHalf, first);
    match machine.layout {
        Layout::Ring => {
            let angle = |p: &usize| std::f64::consts::TAU * *p as f64 / size as f64;
            let column = |f: fn(f64) -> f64| places.iter().map(|p| f(angle(p))).collect();
            let wave = Contrast::new(vec![column(f64::cos), column(f64::sin)]);
            all.push((Shape::Wave, wave));
        }
        Layout::Row => {
            let along = |p: &usize| *p as f64 / (size - 1).max(1) as f64;
            let slope = Contrast::new(vec![places.iter().map(along).collect()]);
            all.push((Shape::Slope, slope));
        }
    }
    all
}

/// A contrast with what came of it.
struct Tried<'a> {
    shape: Shape<'a>,
    fit: Fit,
    /// What it leaves and costs, in squared standard errors; the smallest explains best.
    score: f64,
}

impl<'a> Tried<'a> {
    fn new(shape: Shape<'a>, contrast: &Contrast, level: &Level, margin: f64) -> Option<Self> {
        let fit = contrast.fit(&level.means, &level.errors, margin)?;
        let left = squares(&fit.remainder) / nobodys_variance(level, margin);
        let score = left + PER_PARAMETER * fit.coefficients.len() as f64;
        Some(Self { shape, fit, score })
    }

    fn told(&self, p: f64, family: usize, machine: &Machine) -> Option<Pattern> {
        let alone = 0.05 / family as f64;
        let (kind, value, std_error) = match self.shape {
            Shape::Wave => self.wave(machine),
            shape => {
                let std_error = self.fit.covariance[0].sqrt();
                (
                    self.split(shape, machine),
                    self.fit.coefficients[0],
                    std_error,
                )
            }
        };
        let half = dist::t::isf(alone / 2.0, self.fit.df).ok()? * std_error;
        let effect = Estimate {
            value,
            low: value - half,
            high: value + half,
        };
        Some(Pattern {
            words: words(&kind, value),
            kind,
            effect,
            p,
        })
    }

    fn split(&self, shape: Shape, machine: &Machine) -> PatternKind {
        let at = |place: usize| machine.listed[place].clone();
        let size = machine.listed.len();
        match shape {
            Shape::Slope | Shape::Wave => PatternKind::Slope {
                first: at(0),
                last: at(size - 1),
            },
            Shape::OddFromEven => PatternKind::OddFromEven,
            Shape::HalfFromHalf => PatternKind::HalfFromHalf {
                first_ends: at(size.div_ceil(2) - 1),
                second_begins: at(size.div_ceil(2)),
            },
            Shape::Group(group) => PatternKind::Group {
                name: group.name.clone(),
            },
        }
    }

    /// Amplitude and phase from cosine and sine; the amplitude's error is that along its direction.
    fn wave(&self, machine: &Machine) -> (PatternKind, f64, f64) {
        let size = machine.listed.len();
        let (c, s) = (self.fit.coefficients[0], self.fit.coefficients[1]);
        let amplitude = c.hypot(s);
        let (u, v) = (c / amplitude, s / amplitude);
        let covariance = &self.fit.covariance;
        let variance = u * u * covariance[0] + 2.0 * u * v * covariance[1] + v * v * covariance[3];
        let turn = s.atan2(c) / std::f64::consts::TAU * size as f64;
        let at = |turn: f64| {
            let place = turn.round().rem_euclid(size as f64) as usize;
            machine.listed[place % size].clone()
        };
        let kind = PatternKind::Wave {
            highest: at(turn),
            lowest: at(turn + size as f64 / 2.0),
        };
        (kind, amplitude, variance.sqrt())
    }
}

/// What it is, for people, without its size.
fn words(kind: &PatternKind, effect: f64) -> String {
    let above = if effect < 0.0 { "below" } else { "above" };
    match kind {
        PatternKind::Wave { highest, lowest } => {
            format!("one wave around the ring, highest at {highest}, lowest at {lowest}")
        }
        PatternKind::Slope { first, last } if effect < 0.0 => {
            format!("a slope along the row, falling from {first} to {last}")
        }
        PatternKind::Slope { first, last } => {
            format!("a slope along the row, rising from {first} to {last}")
        }
        PatternKind::OddFromEven => format!("the odd places {above} the even ones"),
        PatternKind::HalfFromHalf {
            first_ends,
            second_begins,
        } => format!("the half up to {first_ends} {above} the half from {second_begins} on"),
        PatternKind::Group { name } => format!("{name} {above} the rest"),
    }
}

/// Whether what remains without a pattern is even: by the blocked test, or, with a margin, no pair
/// surely beyond it.
fn is_even(level: &Level, fit: &Fit, machine: &Machine) -> bool {
    let free = (fit.remainder.len() - 1).saturating_sub(fit.coefficients.len());
    if free == 0 {
        return false;
    }
    let f = squares(&fit.remainder) / level.errors.mean_variance() / free as f64;
    let by_chance = dist::f::sf(f, free as f64, fit.df).unwrap_or(0.0);
    if by_chance > EVEN_ABOVE {
        return true;
    }
    let pairs = Means {
        means: &fit.remainder,
        error: &|i, j| level.errors.of(i, j),
        margin: &|_, _| machine.margin,
    };
    machine.margin > 0.0 && pairs.smallest_p() > EVEN_ABOVE
}
