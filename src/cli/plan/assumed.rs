//! What plan takes as given of a bank: how many sources, how they scatter, how fast they deliver.

/// What is assumed of a bank, and where it is from.
#[derive(Clone, Debug, PartialEq)]
pub struct Assumed {
    /// Sources that are compared, 2 or more.
    pub sources: usize,
    /// Sd of a single value within its source, in the unit; above 0.
    pub sd: f64,
    /// The sds of single sources, where they are seen to differ; empty where not.
    pub own_sd: Vec<f64>,
    /// Correlation of neighbouring values of a source.
    pub phi: f64,
    /// Time between the values of a source, in microseconds; above 0.
    pub interval_us: i64,
    /// Where this is from, for people.
    pub from: String,
}

impl Assumed {
    /// The sd of every source.
    pub fn sds(&self) -> Vec<f64> {
        let own = |s: usize| self.own_sd.get(s).copied().unwrap_or(self.sd);
        (0..self.sources).map(own).collect()
    }

    /// How many values of a source a stretch of time holds.
    pub fn values_in(&self, us: i64) -> usize {
        usize::try_from(us / self.interval_us.max(1)).unwrap_or(0)
    }
}
