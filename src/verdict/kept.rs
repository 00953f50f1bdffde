//! Whether a bank kept its call budget, as far as people say what its calls came to.
//!
//! "Nothing found" is a false call. Their count in a time is Poisson about the true rate times the time;
//! the exact limits of its mean are chi-square quantiles (Garwood 1936): lower chi²(0.05; 2c)/2, upper
//! chi²(0.95; 2c + 2)/2, each one-sided at 95 %. The budget is surely broken when the lower limit is
//! above what it allows, and surely kept when the upper one is not; in between the count agrees with it.
//! Calls of which nobody said anything count as neither, so the more are told, the more this says.

use crate::model::{Budget, Time, US_PER_DAY};
use crate::stats::dist::chi_square;

/// Probability that a limit is on the wrong side.
const BEYOND: f64 = 0.05;

/// What the count says of the budget.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Keeping {
    /// The upper limit is within the budget.
    Kept,
    /// The count agrees with the budget, and with worse.
    Agrees,
    /// The lower limit is beyond the budget.
    Broken,
}

impl Keeping {
    /// The word in interfaces.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Kept => "kept",
            Self::Agrees => "agrees",
            Self::Broken => "broken",
        }
    }

    /// The words people read.
    pub const fn words(self) -> &'static str {
        match self {
            Self::Kept => "surely kept",
            Self::Agrees => "in keeping so far",
            Self::Broken => "surely exceeded",
        }
    }
}

/// A bank's calls beside its budget.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BudgetKept {
    /// Calls made.
    pub calls: u64,
    /// Calls of which somebody said what came of them.
    pub told: u64,
    /// Calls with nothing found.
    pub nothing_found: u64,
    /// Days watched.
    pub days: f64,
    /// False calls that the budget allows in that time.
    pub allowed: f64,
    /// Lower 95 % limit of the expected false calls in that time.
    pub low: f64,
    /// Upper 95 % limit.
    pub high: f64,
    /// What follows.
    pub keeping: Keeping,
}

/// What a bank's calls came to.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Came {
    /// Calls made.
    pub calls: u64,
    /// Calls of which somebody said what came of them.
    pub told: u64,
    /// Calls with nothing found.
    pub nothing_found: u64,
}

/// Judges the budget over the time from `began` until `now`; `None` before any has passed.
pub fn budget_kept(budget: Budget, came: Came, began: Time, now: Time) -> Option<BudgetKept> {
    let us = now.us_since(began);
    if us <= 0 {
        return None;
    }
    let allowed = budget.per_us() * us as f64;
    let (low, high) = poisson_limits(came.nothing_found)?;
    let keeping = if low > allowed {
        Keeping::Broken
    } else if high <= allowed {
        Keeping::Kept
    } else {
        Keeping::Agrees
    };
    let Came {
        calls,
        told,
        nothing_found,
    } = came;
    Some(BudgetKept {
        calls,
        told,
        nothing_found,
        days: us as f64 / US_PER_DAY as f64,
        allowed,
        low,
        high,
        keeping,
    })
}

/// One-sided 95 % limits of a Poisson mean from a count.
fn poisson_limits(count: u64) -> Option<(f64, f64)> {
    let c = count as f64;
    let low = match count {
        0 => 0.0,
        _ => chi_square::quantile(BEYOND, 2.0 * c).ok()? / 2.0,
    };
    let high = chi_square::isf(BEYOND, 2.0 * c + 2.0).ok()? / 2.0;
    Some((low, high))
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Probability of at most `count` at this mean, summed term by term.
    fn at_most(count: u64, mean: f64) -> f64 {
        let terms = (0..=count).scan(1.0, |term, i| {
            if i > 0 {
                *term *= mean / i as f64;
            }
            Some(*term)
        });
        (-mean).exp() * terms.sum::<f64>()
    }

    #[test]
    fn the_limits_are_where_the_summed_probabilities_say() {
        for count in [0, 1, 2, 5, 20] {
            let (low, high) = poisson_limits(count).expect("in reach");
            assert!((at_most(count, high) - 0.05).abs() < 1e-10, "{count}");
            if count > 0 {
                let more = 1.0 - at_most(count - 1, low);
                assert!((more - 0.05).abs() < 1e-10, "{count}");
            }
        }
        // Without any count the upper limit is −ln 0.05.
        let (low, high) = poisson_limits(0).expect("in reach");
        assert_eq!(low, 0.0);
        assert!((high + 0.05_f64.ln()).abs() < 1e-10);
    }

    fn check(nothing_found: u64, days: i64, wanted: Keeping) {
        let came = Came {
            calls: nothing_found + 2,
            told: nothing_found + 1,
            nothing_found,
        };
        let budget = Budget::new(1.0, 90.0).expect("a budget");
        let began = Time::from_us(5);
        let now = began.plus_us(days * US_PER_DAY);
        let kept = budget_kept(budget, came, began, now).expect("time has passed");
        assert_eq!(kept.keeping, wanted, "{nothing_found} in {days} days");
        assert!((kept.allowed - days as f64 / 90.0).abs() < 1e-12);
    }

    #[test]
    fn few_days_say_little_and_many_false_calls_say_enough() {
        check(0, 30, Keeping::Agrees);
        check(0, 270, Keeping::Kept);
        check(0, 269, Keeping::Agrees);
        check(1, 4, Keeping::Broken);
        check(1, 5, Keeping::Agrees);
        check(4, 90, Keeping::Broken);
        let came = Came {
            calls: 0,
            told: 0,
            nothing_found: 0,
        };
        let budget = Budget::new(1.0, 90.0).expect("a budget");
        let now = Time::from_us(7);
        assert_eq!(budget_kept(budget, came, now, now), None);
    }
}
