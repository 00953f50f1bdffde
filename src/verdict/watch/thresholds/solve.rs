//! The one solver of this folder: where a falling function of a threshold reaches nothing.

/// Relative accuracy of a threshold: far below what a rate is known to.
const ACCURACY: f64 = 1e-9;

/// Where `f`, falling from `low` to `high`, crosses 0, by the Illinois form of the false position
/// (Dowell and Jarratt 1971). An end whose value has the wrong sign is the answer itself: the
/// threshold is then clamped to the range in which the formulas mean anything.
pub fn falling_root(low: f64, high: f64, f: impl Fn(f64) -> f64) -> f64 {
    let (mut low, mut high) = (low, high);
    let (mut at_low, mut at_high) = (f(low), f(high));
    if at_low <= 0.0 {
        return low;
    }
    if at_high >= 0.0 {
        return high;
    }
    for round in 0..200 {
        // Values of minus infinity (an underflowed tail) give no slope: halve.
        let slope = at_low - at_high;
        let middle = if slope.is_finite() && round % 8 != 7 {
            low + (high - low) * at_low / slope
        } else {
            0.5 * (low + high)
        };
        if high - low <= ACCURACY * high {
            return middle;
        }
        let value = f(middle);
        if value == 0.0 {
            return middle;
        }
        let moved = middle - if value > 0.0 { low } else { high };
        if value > 0.0 {
            (low, at_low) = (middle, value);
            at_high *= 0.5;
        } else {
            (high, at_high) = (middle, value);
            at_low *= 0.5;
        }
        if moved.abs() <= 0.1 * ACCURACY * middle {
            return middle;
        }
    }
    0.5 * (low + high)
}
