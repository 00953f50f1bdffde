//! What residuals are made and measured with: sigma, clip limits, weights, margins of single sources.

use serde::{Deserialize, Serialize};

use super::Terms;
use super::contrast::Judged;
use super::learnt::Learnt;

/// Before the shape of the noise is known.
const FIRST_CLIP: f64 = 3.0;
/// Deviations after which it is.
const SHAPE_KNOWN: u32 = 2_000;

/// Rounding alone has the step's width over the square root of 12 as its sd.
const ROUNDING_VARIANCE: f64 = 1.0 / 12.0;

/// Sigma and what follows from it, by column where sources differ.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Scale {
    /// Sd of a single value within its source, in the unit; above 0.
    pub sigma: f64,
    /// Whether the resolution speaks rather than the noise.
    pub floored: bool,
    /// Values are clipped this many sd beyond the margin.
    pub clip_sd: f64,
    /// The correlation that is paid for.
    pub phi: f64,
    /// Sd, weight and clip limit by column where sources differ; empty where not.
    pub own: Vec<Own>,
    /// By how much a column's own margin is larger than the bank's, in the unit; empty where none is.
    pub allowed: Vec<f64>,
}

/// One source whose sd differs from others'.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Own {
    /// Variance of one value, unit squared.
    pub variance: f64,
    /// Its weight in the mean: one over the variance.
    pub weight: f64,
    /// Values further from the median than this are clipped.
    pub limit: f64,
}

impl Scale {
    /// The scale with sigma alone, lifted to what the resolution makes of values that do not scatter;
    /// `None` when there is neither scatter nor a resolution.
    pub fn of_sigma(sigma: f64, terms: &Terms) -> Option<Self> {
        let floor = terms
            .resolution
            .map_or(0.0, |r| (r * r * ROUNDING_VARIANCE).sqrt());
        let usable = f64::max(sigma, floor);
        (usable > 0.0 && usable.is_finite()).then(|| Self {
            sigma: usable,
            floored: sigma < floor,
            clip_sd: FIRST_CLIP,
            ..Self::default()
        })
    }

    /// The scale after what was learnt, for the compared sources; where the noise is normal, values are
    /// clipped `most_clip` sd beyond the margin.
    pub fn of_learnt(
        learnt: &mut Learnt,
        columns: &[u16],
        terms: &Terms,
        most_clip: f64,
    ) -> Option<Self> {
        let mut scale = Self::of_sigma(learnt.variance()?.sqrt(), terms)?;
        scale.phi = learnt.phi_paid();
        if let Some(scores) = learnt.scores() {
            // The limit belongs to the values before they are scored.
            scale.clip_sd = scores.limit / scale.sigma;
        } else if learnt.shape().total() >= SHAPE_KNOWN {
            scale.clip_sd = learnt.shape().clip_sd(most_clip);
        }
        let own = learnt
            .own_variances(columns)
            .into_iter()
            .map(|variance| Own {
                variance,
                weight: 1.0 / variance,
                limit: scale.clip_sd * variance.sqrt() + terms.margin,
            });
        scale.own = own.collect();
        Some(scale)
    }

    /// What dependence multiplies variances of sums with: the variance of the mean of a first-order
    /// autoregression over that of independent values (Bayley and Hammersley 1946).
    pub fn factor(&self) -> f64 {
        (1.0 + self.phi) / (1.0 - self.phi)
    }

    /// Sd of a single value, dependence paid.
    pub fn paid_sigma(&self) -> f64 {
        self.sigma * self.factor().sqrt()
    }

    /// Variance of one value in a column, dependence paid, unit squared.
    pub fn paid(&self, column: usize) -> f64 {
        let plain = self.sigma * self.sigma;
        self.factor() * self.own.get(column).map_or(plain, |own| own.variance)
    }

    /// How window means are judged.
    pub fn judged(&self, terms: &Terms) -> Judged<'_> {
        Judged {
            variance: self.paid_sigma().powi(2),
            own: &self.own,
            factor: self.factor(),
            margin: terms.margin,
            allowed: &self.allowed,
        }
    }

    /// The margin of a column, in the unit.
    pub fn margin(&self, column: usize, terms: &Terms) -> f64 {
        terms.margin + self.allowed.get(column).copied().unwrap_or(0.0)
    }

    /// Distance from the median beyond which values are clipped, in the unit, where sources do not differ.
    pub fn limit(&self, terms: &Terms) -> f64 {
        self.clip_sd * self.sigma + terms.margin
    }
}
