//! How surely the means of sources differ: the variance of every difference, whatever is missing.
//!
//! Everything that is said about means after a look (names, deviations, patterns) pays from here.

/// Errors of the differences of sources' means, dependence paid for.
pub struct Errors {
    k: usize,
    /// Variance and degrees of freedom of every difference, row by row.
    cells: Vec<(f64, f64)>,
}

impl Errors {
    /// From the variance and degrees of freedom of each difference, in squared units.
    pub fn new(k: usize, cell: impl Fn(usize, usize) -> (f64, f64)) -> Self {
        let pairs = (0..k).flat_map(|i| (0..k).map(move |j| (i, j)));
        let of = |(i, j)| if i == j { (0.0, 1.0) } else { cell(i, j) };
        Self {
            k,
            cells: pairs.map(of).collect(),
        }
    }

    /// Variance of the difference of two means.
    pub fn variance(&self, i: usize, j: usize) -> f64 {
        self.cells[i * self.k + j].0
    }

    /// Standard error of a difference and its degrees of freedom.
    pub fn of(&self, i: usize, j: usize) -> (f64, f64) {
        let (variance, df) = self.cells[i * self.k + j];
        (variance.sqrt(), df)
    }

    /// Variance of a sum of the means with weights that add up to zero: -1/2 sum w_a w_b Var(a - b).
    pub fn of_contrast(&self, weights: &[f64]) -> f64 {
        self.of_contrasts(weights, weights)
    }

    /// Covariance of two such sums.
    pub fn of_contrasts(&self, one: &[f64], other: &[f64]) -> f64 {
        let row = |a: usize| -> f64 {
            let each = other.iter().enumerate();
            each.map(|(b, w)| w * self.variance(a, b)).sum()
        };
        let rows = one.iter().enumerate().filter(|(_, w)| **w != 0.0);
        -0.5 * rows.map(|(a, w)| w * row(a)).sum::<f64>()
    }

    /// The mean variance of a source's mean as the differences show it.
    pub fn mean_variance(&self) -> f64 {
        let pairs = (self.k * (self.k - 1)).max(1) as f64;
        self.cells.iter().map(|c| c.0).sum::<f64>() / (2.0 * pairs)
    }

    /// Degrees of freedom of all differences together: their mean.
    pub fn df(&self) -> f64 {
        let pairs = (self.k * (self.k - 1)).max(1) as f64;
        let all = self.cells.iter().enumerate();
        let between = all.filter(|(at, _)| at / self.k != at % self.k);
        between.map(|(_, c)| c.1).sum::<f64>() / pairs
    }
}
