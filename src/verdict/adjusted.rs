//! Did it work? What the values after an adjustment say of it.

use serde::{Deserialize, Serialize};

use super::Estimate;

/// Values after an adjustment before which nothing is said.
pub const FEWEST_AFTER: usize = 10;

/// What became of an adjustment.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Effect {
    /// The values after it do not tell yet.
    NotSure,
    /// The source is even with the others.
    Worked,
    /// It is still off to the same side.
    TooLittle,
    /// It is off to the other side now.
    Overshot,
}

impl Effect {
    /// The words people read.
    pub const fn words(self) -> &'static str {
        match self {
            Self::NotSure => "cannot tell yet",
            Self::Worked => "it worked",
            Self::TooLittle => "too little",
            Self::Overshot => "it overshot",
        }
    }
}

/// Judges an adjustment by the deviation before it and that of the `values` since, whose simultaneous
/// interval decides: sure only when all of it lies inside `half_width` of even, or beyond `margin`.
pub fn effect_of_adjustment(
    before: &Estimate,
    since: &Estimate,
    values: usize,
    (margin, half_width): (f64, f64),
) -> Effect {
    if values < FEWEST_AFTER {
        return Effect::NotSure;
    }
    let side = before.value.signum();
    let (low, high) = if side > 0.0 {
        (since.low, since.high)
    } else {
        (-since.high, -since.low)
    };
    if low > margin {
        Effect::TooLittle
    } else if high < -margin {
        Effect::Overshot
    } else if low > -half_width && high < half_width {
        Effect::Worked
    } else {
        Effect::NotSure
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_interval_after_it_decides() {
        let low = Estimate {
            value: -2.0,
            low: -2.5,
            high: -1.5,
        };
        let high = Estimate {
            value: 2.0,
            low: 1.5,
            high: 2.5,
        };
        for (since, values, wanted) in [
            ((-0.3, 0.3), 20, Effect::Worked),
            ((-0.3, 0.3), 9, Effect::NotSure),
            ((-1.5, 0.3), 20, Effect::NotSure),
            ((-1.5, -0.9), 20, Effect::TooLittle),
            ((0.9, 2.0), 20, Effect::Overshot),
            ((-0.7, 0.9), 20, Effect::NotSure),
        ] {
            let after = |(low, high): (f64, f64)| Estimate {
                value: (low + high) / 2.0,
                low,
                high,
            };
            let judged = effect_of_adjustment(&low, &after(since), values, (0.8, 0.8));
            assert_eq!(judged, wanted, "{since:?}, {values}");
            let mirrored = after((-since.1, -since.0));
            let judged = effect_of_adjustment(&high, &mirrored, values, (0.8, 0.8));
            assert_eq!(judged, wanted, "mirrored {since:?}, {values}");
        }
    }
}
