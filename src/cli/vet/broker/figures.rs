//! Figures of what was heard for a bank: intervals, standard deviation, resolution.

use std::collections::BTreeMap;

use crate::model::Value;

use super::survey::{BankHeard, Heard};

/// Figures of a bank; each `None` when too little was heard.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Figures {
    /// The median time between two values of a source, in seconds.
    pub(super) interval_s: Option<f64>,
    /// The standard deviation within the sources: of the residuals where cycles are told, from which
    /// what all sources of a cycle share is taken out, else about each source's mean.
    pub(super) sd: Option<f64>,
    /// The smallest step in which the values are written.
    pub(super) resolution: Option<f64>,
}

/// Computes them.
pub(super) fn figures(heard: &BankHeard) -> Figures {
    let sources: Vec<&[Heard]> = heard.sources.values().map(Vec::as_slice).collect();
    Figures {
        interval_s: interval_s(&sources),
        sd: within_cycles(&sources).or_else(|| about_means(&sources)),
        resolution: resolution(&sources),
    }
}

/// The middle one.
pub(super) fn median(values: &mut [i64]) -> Option<i64> {
    values.sort_unstable();
    values.get(values.len() / 2).copied()
}

fn interval_s(sources: &[&[Heard]]) -> Option<f64> {
    let at = |heard: &Heard| heard.taken.unwrap_or(heard.now);
    let steps = |values: &&[Heard]| -> Vec<i64> {
        let pairs = values.windows(2);
        pairs
            .map(|pair| at(&pair[1]).us_since(at(&pair[0])))
            .filter(|us| *us > 0)
            .collect()
    };
    let mut all: Vec<i64> = sources.iter().flat_map(steps).collect();
    Some(median(&mut all)? as f64 / 1e6)
}

/// Pooled over the sources, each about its own mean.
fn about_means(sources: &[&[Heard]]) -> Option<f64> {
    let (mut squares, mut df) = (0.0, 0_usize);
    for values in sources.iter().filter(|values| values.len() > 1) {
        let values: Vec<f64> = values.iter().map(|heard| heard.value.to_f64()).collect();
        let mean = values.iter().sum::<f64>() / values.len() as f64;
        squares += values.iter().map(|x| (x - mean).powi(2)).sum::<f64>();
        df += values.len() - 1;
    }
    (df > 0).then(|| (squares / df as f64).sqrt())
}

/// The residual standard deviation of the two-way table of sources and cycles, over the cycles in which
/// every source delivered; the textbook estimate with (k − 1)(n − 1) degrees of freedom.
fn within_cycles(sources: &[&[Heard]]) -> Option<f64> {
    let mut cycles: BTreeMap<i64, BTreeMap<usize, f64>> = BTreeMap::new();
    for (source, values) in sources.iter().enumerate() {
        for heard in *values {
            cycles
                .entry(heard.cycle?)
                .or_default()
                .insert(source, heard.value.to_f64());
        }
    }
    let rows: Vec<Vec<f64>> = cycles
        .into_values()
        .filter(|row| row.len() == sources.len())
        .map(|row| row.into_values().collect())
        .collect();
    let (n, k) = (rows.len(), sources.len());
    if n < 2 || k < 2 {
        return None;
    }
    let mean = |values: &[f64]| values.iter().sum::<f64>() / values.len() as f64;
    let of_cycles: Vec<f64> = rows.iter().map(|row| mean(row)).collect();
    let all = mean(&of_cycles);
    let of_source = |s: usize| rows.iter().map(|row| row[s]).sum::<f64>() / n as f64;
    let of_sources: Vec<f64> = (0..k).map(of_source).collect();
    let residual = |(row, cycle): (&Vec<f64>, &f64)| -> f64 {
        let cells = row.iter().zip(&of_sources);
        cells
            .map(|(x, source)| (x - source - cycle + all).powi(2))
            .sum()
    };
    let squares: f64 = rows.iter().zip(&of_cycles).map(residual).sum();
    Some((squares / ((k - 1) * (n - 1)) as f64).sqrt())
}

fn resolution(sources: &[&[Heard]]) -> Option<f64> {
    let exponent = |heard: &Heard| match heard.value {
        Value::Decimal { exponent, .. } => Some(i32::from(exponent).min(0)),
        Value::Float(_) => None,
    };
    let values = sources.iter().flat_map(|values| values.iter());
    let exponents: Option<Vec<i32>> = values.map(exponent).collect();
    let least = exponents?.into_iter().min()?;
    // Finer steps than this come from a conversion and not from an instrument.
    (least >= -6).then(|| format!("1e{least}").parse().unwrap_or(1.0))
}

/// A number with two digits that count, as people would write it.
pub(super) fn rounded(x: f64) -> String {
    let magnitude = x.abs().log10().floor();
    if !magnitude.is_finite() {
        return "0".to_owned();
    }
    let places = (1.0 - magnitude).clamp(0.0, 12.0) as usize;
    format!("{x:.places$}")
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::model::Time;

    fn heard(rows: &[(&str, &[(f64, i64)])]) -> BankHeard {
        let mut heard = BankHeard::default();
        for (source, values) in rows {
            let one = |(value, cycle): &(f64, i64)| Heard {
                value: Value::parse(&value.to_string()).expect("a value"),
                taken: Some(Time::from_us(cycle * 2_000_000)),
                now: Time::from_us(cycle * 2_000_000 + 5),
                cycle: Some(*cycle),
            };
            heard
                .sources
                .insert((*source).into(), values.iter().map(one).collect());
        }
        heard
    }

    #[test]
    fn what_a_cycle_shares_is_no_spread() {
        // Sources 2 apart, cycles that move by 10, residuals of ±0.5 in a pattern of sum zero.
        let a = [(0.5, 1), (9.5, 2), (20.0, 3)];
        let b = [(1.5, 1), (12.5, 2), (22.0, 3)];
        let got = figures(&heard(&[("a", &a), ("b", &b)]));
        // By hand: residuals ±0.5, ±0.5 and 0 for each source, so squares 1, df (2−1)(3−1) = 2.
        assert!(
            (got.sd.expect("an sd") - 0.5_f64.sqrt()).abs() < 1e-12,
            "{got:?}"
        );
        assert_eq!((got.interval_s, got.resolution), (Some(2.0), Some(0.1)));
        assert_eq!(figures(&heard(&[("a", &[(1.0, 1)])])).sd, None);
        assert_eq!(figures(&BankHeard::default()), Figures::default());
    }

    #[test]
    fn numbers_are_told_with_two_digits() {
        for (x, text) in [
            (0.01234, "0.012"),
            (1.26, "1.3"),
            (123.4, "123"),
            (0.0, "0"),
            (0.1, "0.10"),
        ] {
            assert_eq!(rounded(x), text);
        }
    }
}
