//! Level against target and declared quantity: what is given away, and how many packs may be short.
//!
//! Information for the packer, nothing more: the spread is that within the cycle, what moves all sources
//! together comes on top, and values are taken as normal. The rules are those of the local authority.

use serde::{Deserialize, Serialize};
use utoipa::ToSchema;

use crate::model::Bank;
use crate::stats::dist::normal;
use crate::verdict::Look;

/// Whether the tolerable negative error of a published rule is shown beside the declared quantity.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub enum Tolerable {
    /// It is not.
    #[default]
    No,
    /// That of Directive 76/211/EEC, annex I, 2.4.
    Eec76211,
}

/// Level against target and declared quantity, in the bank's unit.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize, ToSchema)]
pub struct LevelFigures {
    /// Mean of all sources.
    pub mean: f64,
    /// Target.
    pub target: Option<f64>,
    /// Declared quantity.
    pub declared: Option<f64>,
    /// Given away per pack: the mean less the declared quantity.
    pub over_declared: Option<f64>,
    /// Given away per hour of production, in the unit; null where the rate is not known.
    pub over_per_hour: Option<f64>,
    /// What that costs, in the plant's currency.
    pub cost_per_hour: Option<f64>,
    /// Share of packs expected below the declared quantity.
    pub below_declared: Option<f64>,
    /// The source with the most of them.
    pub worst: Option<String>,
    /// Its share.
    pub worst_share: Option<f64>,
    /// The tolerable negative error, where it was asked for and is known.
    pub tolerable: Option<f64>,
    /// Share of packs expected below the declared quantity less that.
    pub below_tolerable: Option<f64>,
}

impl LevelFigures {
    /// From the last look of a shift; `interval_us` is the time between values of a source.
    pub fn of(
        bank: &Bank,
        look: &Look,
        interval_us: Option<i64>,
        tolerable: Tolerable,
    ) -> Option<Self> {
        let count = look.sources.len() as f64;
        if count == 0.0 {
            return None;
        }
        let what = &bank.characteristic;
        let mean = look.sources.iter().map(|s| s.mean).sum::<f64>() / count;
        let declared = what.declared.map(|v| v.to_f64());
        let over = declared.map(|d| mean - d);
        let per_hour = interval_us.filter(|us| *us > 0);
        let per_hour = per_hour.map(|us| count * 3.6e9 / us as f64);
        let over_per_hour = over.zip(per_hour).map(|(over, packs)| over * packs);
        let cost = bank.cost_per_unit;
        let shares = |limit: f64| look.sources.iter().map(move |s| below(s.mean, s.sd, limit));
        let share = |limit: f64| shares(limit).sum::<f64>() / count;
        let worst = declared.and_then(|d| {
            let named = look.sources.iter().zip(shares(d));
            named.max_by(|a, b| a.1.total_cmp(&b.1))
        });
        let error = match tolerable {
            Tolerable::No => None,
            Tolerable::Eec76211 => declared.and_then(|d| tolerable_error(d, &what.unit)),
        };
        Some(Self {
            mean,
            target: what.target.map(|v| v.to_f64()),
            declared,
            over_declared: over,
            over_per_hour,
            cost_per_hour: over_per_hour.zip(cost).map(|(over, cost)| over * cost),
            below_declared: declared.map(share),
            worst: worst.map(|(s, _)| s.name.to_string()),
            worst_share: worst.map(|(_, share)| share),
            tolerable: error,
            below_tolerable: declared.zip(error).map(|(d, error)| share(d - error)),
        })
    }
}

/// Share of normal values below a limit; without scatter all or none.
fn below(mean: f64, sd: f64, limit: f64) -> f64 {
    if sd > 0.0 {
        normal::cdf((limit - mean) / sd)
    } else {
        f64::from(u8::from(mean < limit))
    }
}

/// The tolerable negative error of a declared quantity in g, ml, kg or l, in the same unit; `None` for
/// other units and outside 5 to 10 000 g or ml. Source: Directive 76/211/EEC, annex I, 2.4; percentages
/// rounded up to 0.1 g or ml.
pub fn tolerable_error(declared: f64, unit: &str) -> Option<f64> {
    let scale = match unit {
        "g" | "ml" | "mL" => 1.0,
        "kg" | "l" | "L" => 1000.0,
        _ => return None,
    };
    let q = declared * scale;
    // A hair below the next tenth is that tenth: 3 % of 500 must stay 15.
    let percent = |p: f64| (q * p / 10.0 - 1e-9).ceil() / 10.0;
    let error = match q {
        q if !(5.0..=10_000.0).contains(&q) => return None,
        q if q <= 50.0 => percent(9.0),
        q if q <= 100.0 => 4.5,
        q if q <= 200.0 => percent(4.5),
        q if q <= 300.0 => 9.0,
        q if q <= 500.0 => percent(3.0),
        q if q <= 1000.0 => 15.0,
        _ => percent(1.5),
    };
    Some(error / scale)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tolerable_errors_are_those_of_the_directive() {
        for (declared, unit, wanted) in [
            (5.0, "g", Some(0.5)),
            (50.0, "g", Some(4.5)),
            (51.0, "g", Some(4.5)),
            (100.0, "ml", Some(4.5)),
            (150.0, "g", Some(6.8)),
            (200.0, "g", Some(9.0)),
            (250.0, "g", Some(9.0)),
            (330.0, "ml", Some(9.9)),
            (500.0, "g", Some(15.0)),
            (750.0, "ml", Some(15.0)),
            (1000.0, "g", Some(15.0)),
            (1.0, "kg", Some(0.015)),
            (1.5, "l", Some(0.0225)),
            (10_000.0, "g", Some(150.0)),
            (10_001.0, "g", None),
            (4.9, "g", None),
            (500.0, "kN", None),
        ] {
            assert_eq!(tolerable_error(declared, unit), wanted, "{declared} {unit}");
        }
    }

    #[test]
    fn without_scatter_all_or_none_are_short() {
        assert_eq!(below(499.0, 0.0, 500.0), 1.0);
        assert_eq!(below(500.0, 0.0, 500.0), 0.0);
        assert_eq!(below(500.0, 2.0, 500.0), 0.5);
    }
}
