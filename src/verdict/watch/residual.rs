//! From the values of a cycle to residuals: clipped about the median of the sources present, less the
//! mean of the clipped values. What moves all sources alike leaves no trace.
//!
//! Clipped at three sd plus the margin: an outlier of one source moves neither its own evidence nor the
//! others' mean without bound, and an offset within the margin is never cut (without the margin in the
//! limit, real offsets would be silenced).

use super::scale::Own;

/// Values are clipped this many sd beyond the margin.
pub const CLIP_SD: f64 = 3.0;

/// The residuals of one cycle, by column; kept between cycles to save allocations.
#[derive(Clone, Debug, Default)]
pub struct Residuals {
    /// The values; worked out, value less mean, NaN where missing.
    pub values: Vec<f64>,
    /// A source's share in the mean; 0 where missing.
    pub shares: Vec<f64>,
    sorted: Vec<f64>,
}

impl Residuals {
    /// Works out the residuals of [`Self::values`] (NaN is missing) in place; values further than `limit`
    /// from the median are clipped, where sources differ by their own limits. Returns how many are
    /// present; with fewer than two there is nothing to compare.
    pub fn work_out(&mut self, limit: f64, own: &[Own]) -> usize {
        self.sorted.clear();
        self.sorted
            .extend(self.values.iter().copied().filter(|v| v.is_finite()));
        let present = self.sorted.len();
        if present < 2 {
            return present;
        }
        let median = median(&mut self.sorted);
        let clipped = |v: f64, limit: f64| {
            // Infinite values are refused long before; here they are as good as missing.
            let there = v.is_finite();
            if there {
                (v - median).clamp(-limit, limit)
            } else {
                f64::NAN
            }
        };
        if own.is_empty() {
            for v in &mut self.values {
                *v = clipped(*v, limit);
            }
            self.centre(present);
        } else {
            for (v, own) in self.values.iter_mut().zip(own) {
                *v = clipped(*v, own.limit);
            }
            self.centre_weighted(own);
        }
        present
    }

    fn centre(&mut self, present: usize) {
        let share = 1.0 / present as f64;
        let there = |v: &f64| if v.is_nan() { 0.0 } else { *v };
        let mean = self.values.iter().map(there).sum::<f64>() * share;
        self.shares.clear();
        for v in &mut self.values {
            self.shares.push(if v.is_nan() { 0.0 } else { share });
            *v -= mean;
        }
    }

    fn centre_weighted(&mut self, own: &[Own]) {
        let (mut all, mut sum) = (0.0, 0.0);
        for (v, own) in self.values.iter().zip(own).filter(|(v, _)| !v.is_nan()) {
            all += own.weight;
            sum += own.weight * v;
        }
        self.shares.clear();
        for (v, own) in self.values.iter_mut().zip(own) {
            self.shares
                .push(if v.is_nan() { 0.0 } else { own.weight / all });
            *v -= sum / all;
        }
    }
}

/// The median of finite values, which are reordered; there is at least one.
#[inline]
pub fn median(values: &mut [f64]) -> f64 {
    let n = values.len();
    let (below, middle, _) = values.select_nth_unstable_by(n / 2, f64::total_cmp);
    let middle = *middle;
    if n % 2 == 1 {
        return middle;
    }
    let lower = below.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    lower + 0.5 * (middle - lower)
}
