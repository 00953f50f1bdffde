//! A source's raw values beside its siblings': what the source's page draws.
//!
//! Owns plain figures of the values in the windows. What must hold: where a bank pairs, dependence is
//! seen within the cycle, because sources of one machine move together. Deliberately absent: any
//! judgement; the looks judge.

use std::collections::BTreeMap;

use crate::engine::WindowView;
use crate::model::Time;

/// Columns of the siblings' band.
const COLUMNS: usize = 60;
/// Classes of the distribution.
pub const CLASSES: usize = 24;
/// Lags at which dependence is shown.
const LAGS: usize = 20;

/// One value: when it was taken, and how much it is, in the unit.
pub type Reading = (Time, f64);

/// A stretch of the siblings' band: where it begins and ends as shares of the time across, and between
/// which values the middle nine tenths of theirs lie.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Band {
    /// Start.
    pub from: f64,
    /// End.
    pub to: f64,
    /// 5 % and 95 %; `None` where no sibling delivered.
    pub ends: Option<(f64, f64)>,
}

/// A source's values, oldest first.
pub fn readings(window: &WindowView) -> Vec<Reading> {
    let origin = window.origin.to_f64();
    let values = window.values.iter();
    values.map(|v| (v.taken, origin + v.offset)).collect()
}

/// The siblings' band over the time from `from` to `to`.
pub fn band(others: &[&WindowView], from: Time, to: Time) -> Vec<Band> {
    let length = to.us_since(from).max(1) as f64;
    let mut columns: Vec<Vec<f64>> = vec![Vec::new(); COLUMNS];
    for (taken, value) in others.iter().flat_map(|w| readings(w)) {
        let share = taken.us_since(from) as f64 / length;
        let column = (share * COLUMNS as f64).floor();
        let last = (COLUMNS - 1) as f64;
        if (0.0..=1.0).contains(&share)
            && let Some(column) = columns.get_mut(column.min(last) as usize)
        {
            column.push(value);
        }
    }
    let stretch = |(at, mut values): (usize, Vec<f64>)| {
        values.sort_by(f64::total_cmp);
        Band {
            from: at as f64 / COLUMNS as f64,
            to: (at + 1) as f64 / COLUMNS as f64,
            ends: quantile(&values, 0.05).zip(quantile(&values, 0.95)),
        }
    };
    columns.into_iter().enumerate().map(stretch).collect()
}

/// The value below which the share `q` of the sorted values lies, in steps of whole values.
pub fn quantile(sorted: &[f64], q: f64) -> Option<f64> {
    let last = sorted.len().checked_sub(1)?;
    sorted.get((q * last as f64).round() as usize).copied()
}

/// Shares of the values in [`CLASSES`] classes of equal width from `low` to `high`; values beyond the
/// ends count at the ends.
pub fn shares(values: impl Iterator<Item = f64>, low: f64, high: f64) -> Vec<f64> {
    let mut counts = vec![0.0; CLASSES];
    let mut all = 0.0;
    for value in values {
        let place = (value - low) / (high - low) * CLASSES as f64;
        let class = place.floor().clamp(0.0, (CLASSES - 1) as f64) as usize;
        if let Some(count) = counts.get_mut(class) {
            *count += 1.0;
        }
        all += 1.0;
    }
    counts.iter_mut().for_each(|c| *c /= f64::max(all, 1.0));
    counts
}

/// The values of a source less the mean of its siblings in the same cycle; as they are without cycles.
pub fn within_cycles(own: &WindowView, others: &[&WindowView]) -> Vec<f64> {
    let mut cycles: BTreeMap<i64, (f64, f64)> = BTreeMap::new();
    for value in others.iter().flat_map(|w| &w.values) {
        if let Some(cycle) = value.cycle {
            let (sum, count) = cycles.entry(cycle).or_default();
            *sum += value.offset;
            *count += 1.0;
        }
    }
    if cycles.is_empty() {
        return own.values.iter().map(|v| v.offset).collect();
    }
    let residual = |v: &crate::engine::WindowValue| {
        let (sum, count) = cycles.get(&v.cycle?)?;
        Some(v.offset - sum / count)
    };
    own.values.iter().filter_map(residual).collect()
}

/// Correlations at lags 1, 2, 3 … about the mean, and the limit 1.96/√n that chance alone stays within
/// nineteen times of twenty (Bartlett 1946); `None` with fewer than ten values or without spread.
pub fn correlations(values: &[f64]) -> Option<(Vec<f64>, f64)> {
    let n = values.len();
    if n < 10 {
        return None;
    }
    let mean = values.iter().sum::<f64>() / n as f64;
    let centred: Vec<f64> = values.iter().map(|x| x - mean).collect();
    let squares: f64 = centred.iter().map(|x| x * x).sum();
    if squares <= 0.0 || !squares.is_finite() {
        return None;
    }
    let at = |lag: usize| {
        let later = centred.iter().skip(lag);
        centred.iter().zip(later).map(|(a, b)| a * b).sum::<f64>() / squares
    };
    let lags = LAGS.min(n / 4).max(1);
    Some(((1..=lags).map(at).collect(), 1.96 / (n as f64).sqrt()))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::engine::WindowValue;
    use crate::model::Value;

    fn window(name: &str, offsets: &[f64]) -> WindowView {
        let value = |(at, offset): (usize, &f64)| WindowValue {
            taken: Time::from_us(at as i64 * 1_000_000),
            cycle: Some(at as i64),
            offset: *offset,
        };
        WindowView {
            source: name.into(),
            origin: Value::parse("10").expect("a value"),
            values: offsets.iter().enumerate().map(value).collect(),
        }
    }

    #[test]
    fn the_common_movement_is_taken_out() {
        let own = window("a", &[1.0, 2.0, 4.0]);
        let others = [window("b", &[0.0, 1.0, 2.0]), window("c", &[2.0, 1.0])];
        let others: Vec<&WindowView> = others.iter().collect();
        assert_eq!(within_cycles(&own, &others), [0.0, 1.0, 2.0]);
        assert_eq!(readings(&own)[1], (Time::from_us(1_000_000), 12.0));
    }

    #[test]
    fn correlations_know_alternation_and_degenerate_input() {
        let alternating: Vec<f64> = (0..40).map(|i| f64::from(i % 2)).collect();
        let (found, limit) = correlations(&alternating).expect("enough");
        assert!((found[0] + 0.975).abs() < 1e-9, "{found:?}");
        assert!((found[1] - 0.95).abs() < 1e-9, "{found:?}");
        assert!((limit - 0.3099).abs() < 1e-3);
        assert_eq!(found.len(), 10);
        assert_eq!(correlations(&[1.0; 40]), None);
        assert_eq!(correlations(&[1.0, 2.0]), None);
    }

    #[test]
    fn shares_add_up_and_bands_have_gaps() {
        let found = shares([0.0, 0.5, 1.0, 9.0].into_iter(), 0.0, 1.0);
        assert!((found.iter().sum::<f64>() - 1.0).abs() < 1e-12);
        assert_eq!(found[CLASSES - 1], 0.5);
        let others = window("b", &[0.0; 3]);
        let bands = band(&[&others], Time::from_us(0), Time::from_us(2_000_000));
        assert_eq!(bands.first().and_then(|b| b.ends), Some((10.0, 10.0)));
        assert_eq!(bands.get(7).and_then(|b| b.ends), None);
        assert_eq!(bands.last().and_then(|b| b.ends), Some((10.0, 10.0)));
    }
}
