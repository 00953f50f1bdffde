//! Order statistics: median, median absolute deviation, midranks.

/// The median of `values`, which are reordered; NaN for no values or when one is NaN.
///
/// For an even number the mean of the two middle values, formed so that it cannot overflow.
pub fn median(values: &mut [f64]) -> f64 {
    let n = values.len();
    if n == 0 || values.iter().any(|v| v.is_nan()) {
        return f64::NAN;
    }
    let (below, &mut middle, _) = values.select_nth_unstable_by(n / 2, f64::total_cmp);
    if n % 2 == 1 {
        return middle;
    }
    let lower = below.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if lower == middle {
        lower
    } else {
        0.5 * lower + 0.5 * middle
    }
}

/// The median of `values`, left as they are. Otherwise as [`median`].
pub fn median_of(values: &[f64]) -> f64 {
    median(&mut values.to_vec())
}

/// Median absolute deviation from the median, unscaled, in the values' unit (Hampel 1974).
///
/// Times 1.4826 it estimates the sd of normal values. NaN as [`median`].
pub fn mad(values: &[f64]) -> f64 {
    let mut deviations = values.to_vec();
    let centre = median(&mut deviations);
    for d in &mut deviations {
        *d = (*d - centre).abs();
    }
    median(&mut deviations)
}

/// Ranks from 1, ties sharing their mean rank, and the tie sum of t^3 - t over groups of t equals.
///
/// NaN values must have been refused before.
pub(super) fn midranks(values: &[f64]) -> (Vec<f64>, f64) {
    let mut order: Vec<usize> = (0..values.len()).collect();
    order.sort_unstable_by(|&a, &b| values[a].total_cmp(&values[b]).then(a.cmp(&b)));
    let mut ranks = vec![0.0; values.len()];
    let mut ties = 0.0;
    let mut from = 0;
    while from < order.len() {
        let mut to = from + 1;
        while to < order.len() && values[order[to]] == values[order[from]] {
            to += 1;
        }
        let t = (to - from) as f64;
        ties += t * t * t - t;
        for &index in &order[from..to] {
            ranks[index] = 0.5 * ((from + 1) as f64 + to as f64);
        }
        from = to;
    }
    (ranks, ties)
}
