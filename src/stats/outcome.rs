//! What every test answers with, and the named outcomes of input that has no answer.

use super::dist::OutOfReach;
use std::fmt;

/// Why a statistic has no value for this input. Each is an outcome to be shown, never a small number.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Degenerate {
    /// Fewer than two sources were given (or have values).
    FewerThanTwoSources,
    /// The method needs more sources than were given.
    TooFewSources {
        /// How many it needs.
        needed: usize,
    },
    /// A source has fewer values than the method needs.
    TooFewValues {
        /// Index of the first such source.
        source: usize,
        /// How many values the method needs of each source.
        needed: usize,
    },
    /// More values than the method is defined for.
    TooManyValues {
        /// The most it takes.
        most: usize,
    },
    /// A source does not vary at all, and the method divides by its spread.
    ZeroSpread {
        /// Index of the first such source.
        source: usize,
    },
    /// No source varies within itself, but the sources differ: the statistic has no finite value.
    ZeroSpreadWithin,
    /// Every value of every source is the same.
    AllEqual,
    /// Some value is NaN or infinite.
    NotFinite,
    /// Squares of the deviations leave the range of `f64` (deviations beyond 1e±140).
    OutOfRange,
    /// Some source is never compared with some other, directly or through third ones.
    DisconnectedBlocks,
    /// The method is defined only for sources with the same number of values.
    UnequalCounts,
    /// Slices that belong together differ in length, or an index is outside them.
    ShapeMismatch,
    /// A probability argument is not strictly between 0 and 1.
    NotAProbability,
    /// A distribution has no answer for these arguments.
    Distribution(OutOfReach),
}

// By hand: a derive would take the field `source` for the error's cause.
impl fmt::Display for Degenerate {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::FewerThanTwoSources => write!(f, "fewer than two sources to compare"),
            Self::TooFewSources { needed } => write!(f, "fewer than {needed} sources"),
            Self::TooFewValues { source, needed } => {
                write!(f, "source {} has fewer than {needed} values", source + 1)
            }
            Self::TooManyValues { most } => write!(f, "more than {most} values"),
            Self::ZeroSpread { source } => write!(f, "source {} does not vary", source + 1),
            Self::ZeroSpreadWithin => {
                write!(f, "the sources differ, but none varies within itself")
            }
            Self::AllEqual => write!(f, "all values are equal"),
            Self::NotFinite => write!(f, "some value is not a finite number"),
            Self::OutOfRange => {
                write!(f, "the values are too far apart or too close to be squared")
            }
            Self::DisconnectedBlocks => write!(f, "the cycles do not connect all sources"),
            Self::UnequalCounts => write!(f, "the sources have different numbers of values"),
            Self::ShapeMismatch => write!(
                f,
                "the lists that belong together differ, or an index is outside them"
            ),
            Self::NotAProbability => write!(f, "a probability must lie strictly between 0 and 1"),
            Self::Distribution(why) => write!(f, "{why}"),
        }
    }
}

impl std::error::Error for Degenerate {}

impl From<OutOfReach> for Degenerate {
    fn from(why: OutOfReach) -> Self {
        Self::Distribution(why)
    }
}

/// Degrees of freedom of a test's reference distribution; real, not always whole.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Df {
    /// The distribution has none.
    None,
    /// Chi-square or t.
    One(f64),
    /// F: numerator and denominator.
    Two(f64, f64),
}

/// One test: its statistic, the degrees of freedom, and the upper-tail probability.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Test {
    /// The statistic, without unit unless its method says otherwise.
    pub statistic: f64,
    /// Degrees of freedom of the reference distribution.
    pub df: Df,
    /// P(statistic at least this large) when the sources are alike.
    pub p: f64,
}
