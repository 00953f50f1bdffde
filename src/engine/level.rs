//! Whether a bank's mean is surely below the declared quantity.
//!
//! The upper 99.9 % limit comes from ten batch means of the longest span (Student's t with nine degrees
//! of freedom), so movement that all sources share and dependence between neighbours are inside it. It
//! must lie below the declared quantity at two looks that share no value. Back: the mean of a window that
//! shares no value with the last low one is not below it. Deliberately absent: single packs.

use crate::stats::dist::t;

use super::bank::Watched;

/// Batches of the longest span.
const BATCHES: usize = 10;

/// Probability of the limit.
const BEYOND: f64 = 0.001;

/// Where the level was seen to be low, by the count of values of every source.
#[derive(Clone, Debug, Default)]
pub struct Sensed {
    /// The first time of those that are not over.
    first: Option<Vec<u64>>,
    /// The last time.
    last: Option<Vec<u64>>,
}

/// What the level comes to.
pub enum Level {
    /// Below at two looks that share no value.
    Below { mean: f64, upper: f64 },
    /// Nothing new can be said.
    Unsure,
    /// Not below, on fresh values.
    Back,
}

/// Mean and upper limit of the bank.
struct Limit {
    mean: f64,
    upper: f64,
}

impl Watched {
    /// Judges the level against the declared quantity; `stands` says whether it is known to be below.
    pub fn level(&mut self, declared: f64, stands: bool) -> Level {
        let n = self.bank.window_length();
        let Some(limit) = self.limit(n) else {
            return Level::Unsure;
        };
        let counts: Vec<u64> = self.state.sources.iter().map(|s| s.accepted).collect();
        let fresh = |since: &Vec<u64>| {
            let pairs = counts.iter().zip(since);
            let delivers = pairs.filter(|(now, then)| now > then);
            let mut moved = delivers.map(|(now, then)| now - then).peekable();
            moved.peek().is_some() && moved.all(|new| new >= n as u64)
        };
        let sensed = &mut self.senses.level;
        if limit.upper < declared {
            sensed.last = Some(counts.clone());
            let first = sensed.first.get_or_insert_with(|| counts.clone());
            let twice = fresh(first);
            return if stands || twice {
                let Limit { mean, upper } = limit;
                Level::Below { mean, upper }
            } else {
                Level::Unsure
            };
        }
        sensed.first = None;
        let since = sensed.last.get_or_insert_with(|| counts.clone());
        if limit.mean >= declared && fresh(since) {
            Level::Back
        } else {
            Level::Unsure
        }
    }

    /// From the newest values of every source that takes part and has enough of them; `None` while one
    /// has not.
    fn limit(&self, n: usize) -> Option<Limit> {
        let size = n / BATCHES;
        let sources = self.state.sources.iter().zip(self.state.windows.rings());
        let delivers = sources.filter(|(s, _)| s.takes_part() && !s.silent);
        let mut batches = [0.0; BATCHES];
        let mut k = 0.0;
        for (_, ring) in delivers {
            let mut newest = ring.fresh().rev().map(|e| e.offset);
            for batch in &mut batches {
                let sum: f64 = (0..size)
                    .map(|_| newest.next())
                    .sum::<Option<f64>>()
                    .filter(|_| size > 0)?;
                *batch += sum / size as f64;
            }
            k += 1.0;
        }
        if k == 0.0 {
            return None;
        }
        let origin = self.state.windows.origin().to_f64();
        let means = batches.map(|sum| sum / k);
        let count = BATCHES as f64;
        let mean = means.iter().sum::<f64>() / count;
        let squares: f64 = means.iter().map(|m| (m - mean) * (m - mean)).sum();
        let se = (squares / (count - 1.0) / count).sqrt();
        let quantile = t::isf(BEYOND, count - 1.0).ok()?;
        Some(Limit {
            mean: mean + origin,
            upper: mean + origin + quantile * se,
        })
    }
}
