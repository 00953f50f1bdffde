//! From the values of a cycle to residuals: clipped about the median of the sources present, less the
//! mean of the clipped values. What moves all sources alike leaves no trace.
//!
//! Clipped at some sd plus the margin: an outlier of one source moves neither its own evidence nor the
//! others' mean without bound, and an offset within the margin is never cut (without the margin in the
//! limit, real offsets would be silenced). How many sd, the shape of the noise says.

use super::scale::Own;

/// The residuals of one cycle, by column; kept between cycles to save allocations.
#[derive(Clone, Debug, Default)]
pub struct Residuals {
    /// The values; worked out, value less mean, NaN where missing.
    pub values: Vec<f64>,
    /// A source's share in the mean; 0 where missing.
    pub shares: Vec<f64>,
    /// What clipping took off.
    pub excess: Vec<f64>,
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
        self.excess.clear();
        for (column, v) in self.values.iter_mut().enumerate() {
            let limit = own.get(column).map_or(limit, |own| own.limit);
            // Infinite values are refused long before; here they are as good as missing.
            let apart = if v.is_finite() { *v - median } else { f64::NAN };
            *v = apart.clamp(-limit, limit);
            self.excess.push(apart - *v);
        }
        if own.is_empty() {
            self.centre(present);
        } else {
            self.centre_weighted(own);
        }
        present
    }

    /// Gives every present residual the same share, as when they were worked out.
    pub fn share_alike(&mut self) {
        let present = self.values.iter().filter(|v| !v.is_nan()).count();
        let share = 1.0 / present.max(1) as f64;
        self.shares.clear();
        let shares = self
            .values
            .iter()
            .map(|v| if v.is_nan() { 0.0 } else { share });
        self.shares.extend(shares);
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
