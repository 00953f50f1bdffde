//! Distributions: upper tails, lower tails and quantiles, each to a stated relative error.
//!
//! This file decides which distributions are ours and which come from `statrs`. A call budget of
//! one false call in months works at tail probabilities of 1e-5 to 1e-9, so every upper tail is
//! computed directly and never as one minus the lower tail. `statrs` 0.19 forms the F tail as one
//! minus a ratio, takes log-gamma differences that lose digits at large df, and stops its
//! continued fraction without a word; the measured figures stand in `tests/certified`. So all the
//! tails below are ours; `statrs` serves as one of the independent references of the tests.
//!
//! | distribution | method | source |
//! | --- | --- | --- |
//! | [`normal`] | complementary error function of `libm`, rounding of the argument put back | Cody 1969 |
//! | [`chi_square`] | series and continued fraction with saddle-point prefix | Abramowitz and Stegun 6.5.29, 6.5.31; Loader 2000 |
//! | [`beta`], [`f`], [`t`] | continued fraction with saddle-point prefix | DiDonato and Morris 1992 (TOMS 708); Loader 2000 |
//! | [`studentized_range`] | trapezoid rule over tables of the range's tail | Copenhaver and Holland 1988 for the form, own quadrature |
//! | [`maximum`]: Dunnett, analysis of means, maximum modulus | the same outer rule over tables of the normal case | Dunnett 1955; Nelson 1982; own quadrature |
//! | [`maximum_f_ratio`] | trapezoid rule over the smallest variance | Hartley 1950 for the statistic |
//! | [`noncentral_f`] | Poisson mixture of beta tails, all terms positive | Johnson, Kotz and Balakrishnan 1995, 30.3 |
//!
//! Conventions: `sf` is the upper tail P(X > x), `cdf` the lower tail P(X <= x), `isf(p)` the x
//! whose upper tail is p, `quantile(p)` the x whose lower tail is p. Degrees of freedom are reals
//! and may be infinite. A result smaller than the smallest positive `f64` is 0; every other failure
//! is an [`OutOfReach`], never a wrong number.

pub mod beta;
pub mod chi_square;
pub mod f;
mod kernel;
pub mod maximum;
pub mod maximum_f_ratio;
pub mod noncentral_f;
pub mod normal;
mod outer;
mod root;
pub mod studentized_range;
pub mod t;
mod tail_table;

use std::fmt;

/// Why a distribution has no answer for these arguments.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum OutOfReach {
    /// An argument is not a number.
    NotANumber,
    /// An argument lies outside the set for which the distribution is defined or tested.
    Argument(&'static str),
    /// An iteration did not settle within its bound.
    NotSettled(&'static str),
}

impl fmt::Display for OutOfReach {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::NotANumber => write!(f, "an argument is not a number"),
            Self::Argument(what) => write!(f, "{what}"),
            Self::NotSettled(what) => write!(f, "{what} did not settle"),
        }
    }
}

impl std::error::Error for OutOfReach {}

/// Refuses anything but a probability strictly between 0 and 1.
fn probability(p: f64) -> Result<f64, OutOfReach> {
    if p.is_nan() {
        Err(OutOfReach::NotANumber)
    } else if p > 0.0 && p < 1.0 {
        Ok(p)
    } else {
        Err(OutOfReach::Argument(
            "a quantile needs a probability strictly between 0 and 1",
        ))
    }
}

/// Refuses degrees of freedom that are not positive (infinity is allowed).
fn degrees(df: f64) -> Result<f64, OutOfReach> {
    if df.is_nan() {
        Err(OutOfReach::NotANumber)
    } else if df > 0.0 {
        Ok(df)
    } else {
        Err(OutOfReach::Argument("degrees of freedom must be positive"))
    }
}
