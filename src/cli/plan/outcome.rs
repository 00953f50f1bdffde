//! From the trials of a fault to how surely and how soon it is called, with standard errors.

/// The times within which people ask for a call, in microseconds: 10 minutes, an hour, a shift.
pub const WITHIN_US: [i64; 3] = [600_000_000, 3_600_000_000, 28_800_000_000];

/// What a figure is worth.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Worth {
    /// As simulated, within its standard error.
    Estimate,
    /// From the power of single looks: calls come at least as surely and at least as soon.
    Bound,
}

/// A figure with its standard error.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Figure {
    /// The figure.
    pub value: f64,
    /// Its standard error.
    pub error: f64,
}

/// How surely and how soon a fault is called.
#[derive(Clone, Debug, PartialEq)]
pub struct Outcome {
    /// Trials it rests on.
    pub trials: usize,
    /// Probability of a call within each of [`WITHIN_US`].
    pub within: [Figure; 3],
    /// Time to the call that half of the trials keep, in microseconds; `None` when it is longer than a
    /// trial.
    pub median_us: Option<Figure>,
    /// The same for nine in ten.
    pub ninety_us: Option<Figure>,
    /// What these figures are worth.
    pub worth: Worth,
}

impl Outcome {
    /// From the cycle of each trial's call, counted from the fault; `None` where none came.
    pub fn of_calls(calls: &[Option<u32>], interval_us: i64) -> Self {
        let interval_us = interval_us as f64;
        let mut cycles: Vec<f64> = calls.iter().flatten().map(|c| f64::from(*c)).collect();
        cycles.sort_by(f64::total_cmp);
        let within = |us: i64| {
            let called = cycles.partition_point(|c| c * interval_us <= us as f64);
            share(called, calls.len())
        };
        let quantile = |q: f64| {
            let figure = quantile(&cycles, calls.len(), q)?;
            Some(Figure {
                value: figure.value * interval_us,
                error: figure.error * interval_us,
            })
        };
        Self {
            trials: calls.len(),
            within: WITHIN_US.map(within),
            median_us: quantile(0.5),
            ninety_us: quantile(0.9),
            worth: Worth::Estimate,
        }
    }

    /// From the power of single looks: `powers` holds how many of the trials each span's look calls once
    /// `us` have passed, shortest span first.
    pub fn of_looks(powers: &[(i64, usize)], trials: usize) -> Self {
        let best_within = |us: i64| {
            let in_time = powers.iter().filter(|(at, _)| *at <= us);
            share(
                in_time.map(|(_, called)| *called).max().unwrap_or(0),
                trials,
            )
        };
        let first = |q: f64| {
            let enough = |(_, called): &&(i64, usize)| *called as f64 >= q * trials as f64;
            let (at, _) = powers.iter().find(enough)?;
            Some(Figure {
                value: *at as f64,
                error: 0.0,
            })
        };
        Self {
            trials,
            within: WITHIN_US.map(best_within),
            median_us: first(0.5),
            ninety_us: first(0.9),
            worth: Worth::Bound,
        }
    }
}

/// A share of the trials with its binomial standard error.
fn share(called: usize, trials: usize) -> Figure {
    let n = trials.max(1) as f64;
    let p = called as f64 / n;
    Figure {
        value: p,
        error: (p * (1.0 - p) / n).sqrt(),
    }
}

/// A quantile over all trials, those without a call last, with the distance of the order statistics one
/// binomial standard deviation to both sides as twice its standard error. `None` when a trial's end
/// comes first.
fn quantile(sorted: &[f64], trials: usize, q: f64) -> Option<Figure> {
    let n = trials as f64;
    let rank = |share: f64| {
        let place = (share * n).ceil() as usize;
        sorted.get(place.clamp(1, trials.max(1)) - 1).copied()
    };
    let value = rank(q)?;
    let step = (q * (1.0 - q) / n).sqrt();
    let low = rank(q - step)?;
    let high = rank(q + step).or(sorted.last().copied())?;
    Some(Figure {
        value,
        error: 0.5 * (high - low),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn calls_become_shares_and_times() {
        // Ten trials at one cycle a second: calls after 1 to 9 minutes, and one that never came.
        let calls: Vec<Option<u32>> = (1..=10).map(|m| (m < 10).then_some(m * 60)).collect();
        let outcome = Outcome::of_calls(&calls, 1_000_000);
        let shares = outcome.within.map(|f| f.value);
        assert_eq!(shares, [0.9; 3]);
        assert!((outcome.within[0].error - 0.0949).abs() < 1e-4);
        assert_eq!(outcome.median_us.map(|f| f.value), Some(300e6));
        assert_eq!(outcome.ninety_us.map(|f| f.value), Some(540e6));
        // A binomial standard deviation of 0.158 is one and a half trials: from the fourth to the seventh.
        assert_eq!(outcome.median_us.map(|f| f.error), Some(90e6));
        let never = Outcome::of_calls(&[None, None, Some(5)], 1_000_000);
        assert_eq!((never.median_us, never.ninety_us), (None, None));
        let none = Outcome::of_calls(&[], 1_000_000);
        assert_eq!((none.trials, none.median_us), (0, None));
    }

    #[test]
    fn looks_give_bounds() {
        let minute = 60_000_000;
        let powers = [(5 * minute, 20), (30 * minute, 70), (600 * minute, 100)];
        let outcome = Outcome::of_looks(&powers, 100);
        assert_eq!(outcome.within.map(|f| f.value), [0.2, 0.7, 0.7]);
        assert_eq!(outcome.median_us.map(|f| f.value), Some(30.0 * 60e6));
        assert_eq!(outcome.ninety_us.map(|f| f.value), Some(600.0 * 60e6));
        assert_eq!(outcome.worth, Worth::Bound);
    }
}
