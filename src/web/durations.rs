//! How long looks and commits take: the two histograms that live outside the snapshot.
//!
//! Owns their buckets. Cheap to clone; every clone counts into the same histograms. Deliberately
//! absent: reading clocks (the caller has measured).

use std::time::Duration;

use prometheus::{Histogram, HistogramOpts};

use super::ServeError;

/// From a tenth of a millisecond to a minute: a look at four sources takes microseconds, a commit on
/// a tired disk seconds.
const BUCKETS_S: [f64; 12] = [
    0.0001, 0.0005, 0.001, 0.005, 0.01, 0.05, 0.1, 0.5, 1.0, 5.0, 15.0, 60.0,
];

/// Collects durations for the metrics.
#[derive(Clone, Debug)]
pub struct Durations {
    looks: Histogram,
    commits: Histogram,
}

impl Durations {
    /// Two empty histograms.
    ///
    /// # Errors
    /// When the metrics library refuses their names or buckets.
    pub fn new() -> Result<Self, ServeError> {
        let make = |name: &str, help: &str| {
            let options = HistogramOpts::new(name, help).buckets(BUCKETS_S.to_vec());
            Histogram::with_opts(options).map_err(|e| ServeError::Durations(e.to_string()))
        };
        Ok(Self {
            looks: make(
                "evenrow_look_seconds",
                "Time that one look at a bank took, all its spans together.",
            )?,
            commits: make(
                "evenrow_store_commit_seconds",
                "Time that one commit to the store took, until it was durable.",
            )?,
        })
    }

    /// One look took this long.
    pub fn observe_look(&self, took: Duration) {
        self.looks.observe(took.as_secs_f64());
    }

    /// One commit took this long.
    pub fn observe_commit(&self, took: Duration) {
        self.commits.observe(took.as_secs_f64());
    }

    /// The histograms, for the registry of one answer.
    pub(super) fn histograms(&self) -> [Histogram; 2] {
        [self.looks.clone(), self.commits.clone()]
    }
}
