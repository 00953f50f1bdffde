//! What to do about a source that is apart, decided from its size and from where the bank stands.
//!
//! Words are the notice's. Deliberately absent: spread, which no adjustment of a level steadies.

use crate::model::Bank;

use super::look::{Estimate, Look};

/// Microseconds of an hour.
const US_PER_HOUR: f64 = 3.6e9;

/// Where the sources that are even stand.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Standing {
    /// Mean of the even ones, in the unit.
    pub even_mean: Option<f64>,
    /// What every source should give; the declared quantity where nothing else is said.
    pub wanted: Option<f64>,
    /// The largest difference that does not matter, in the unit.
    pub margin: f64,
}

/// What is suggested for one source.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Suggestion {
    /// Adjust it by this, in the unit: its deviation taken back.
    Adjust {
        /// The step.
        by: f64,
    },
    /// It is high and the others are low: raise those by this, in the unit.
    RaiseRest {
        /// What the others lack.
        by: f64,
    },
    /// It is high and the others are just where they should be: judge the bank's level first.
    LevelFirst,
    /// Its interval still reaches into the margin.
    NotSure,
}

/// The negative of the deviation, when its interval excludes the margin; never down while the others
/// are at or below what is wanted.
pub fn suggest(deviation: &Estimate, standing: &Standing) -> Suggestion {
    let sure = deviation.low > standing.margin || deviation.high < -standing.margin;
    if !sure {
        return Suggestion::NotSure;
    }
    if deviation.value > 0.0
        && let (Some(mean), Some(wanted)) = (standing.even_mean, standing.wanted)
        && mean <= wanted
    {
        return if mean < wanted {
            Suggestion::RaiseRest { by: wanted - mean }
        } else {
            Suggestion::LevelFirst
        };
    }
    Suggestion::Adjust {
        by: -deviation.value,
    }
}

/// What a bank gives away in an hour at the means of its longest look that has any, where a cost is
/// configured. `interval_us` is the usual time between values of a source.
pub fn cost_per_hour(bank: &Bank, looks: &[Look], interval_us: Option<i64>) -> Option<f64> {
    let (cost, declared) = (bank.cost_per_unit?, bank.characteristic.declared?);
    let look = looks.iter().rev().find(|l| !l.sources.is_empty())?;
    let k = look.sources.len() as f64;
    let mean = look.sources.iter().map(|s| s.mean).sum::<f64>() / k;
    let units = k * US_PER_HOUR / (interval_us.filter(|us| *us > 0)? as f64);
    Some(giveaway_per_hour(mean, declared.to_f64(), units, cost))
}

/// What is given away in an hour: the mean less what is declared, times the units in an hour, times
/// the cost of one. Nothing when the mean is not above.
fn giveaway_per_hour(mean: f64, declared: f64, units_per_hour: f64, cost: f64) -> f64 {
    (mean - declared).max(0.0) * units_per_hour * cost
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn nobody_is_lowered_while_the_others_are_low() {
        let about = |value: f64, half: f64| Estimate {
            value,
            low: value - half,
            high: value + half,
        };
        let standing = |even_mean, wanted| Standing {
            even_mean,
            wanted,
            margin: 0.5,
        };
        let target = Some(503.0);
        for (deviation, half, even, wanted, suggestion) in [
            (
                -1.0,
                0.3,
                Some(503.0),
                target,
                Suggestion::Adjust { by: 1.0 },
            ),
            (-1.0, 0.6, Some(503.0), target, Suggestion::NotSure),
            (1.0, 0.6, Some(503.0), target, Suggestion::NotSure),
            (0.4, 0.1, Some(504.0), target, Suggestion::NotSure),
            (
                1.0,
                0.3,
                Some(503.5),
                target,
                Suggestion::Adjust { by: -1.0 },
            ),
            (1.0, 0.3, Some(503.0), target, Suggestion::LevelFirst),
            (
                1.0,
                0.3,
                Some(501.0),
                target,
                Suggestion::RaiseRest { by: 2.0 },
            ),
            (1.0, 0.3, Some(501.0), None, Suggestion::Adjust { by: -1.0 }),
            (1.0, 0.3, None, target, Suggestion::Adjust { by: -1.0 }),
        ] {
            let told = suggest(&about(deviation, half), &standing(even, wanted));
            assert_eq!(told, suggestion, "{deviation} ± {half} beside {even:?}");
        }
    }

    #[test]
    fn giveaway_is_mean_less_declared_times_rate_times_cost() {
        let an_hour = giveaway_per_hour(503.0, 500.0, 7_200.0, 0.002);
        assert!((an_hour - 43.2).abs() < 1e-9, "{an_hour}");
        assert_eq!(giveaway_per_hour(499.0, 500.0, 7_200.0, 0.002), 0.0);
    }
}
