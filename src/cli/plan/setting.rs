//! The settings that plan compares: the bank as configured, with other budgets and margins, and where
//! the look decides with one more span.

use crate::model::{Bank, Budget};

use super::looks::with_next_span;

/// Which setting.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Variation {
    /// As the configuration has it.
    AsConfigured,
    /// Ten times as many false calls allowed.
    MoreCalls,
    /// A tenth of the false calls allowed.
    FewerCalls,
    /// Half the margin.
    HalfMargin,
    /// Twice the margin.
    TwiceMargin,
    /// One more span, longer than all others.
    LongerSpan,
}

impl Variation {
    /// Its word for programs.
    pub const fn key(self) -> &'static str {
        match self {
            Self::AsConfigured => "as_configured",
            Self::MoreCalls => "ten_times_the_false_calls",
            Self::FewerCalls => "a_tenth_of_the_false_calls",
            Self::HalfMargin => "half_the_margin",
            Self::TwiceMargin => "twice_the_margin",
            Self::LongerSpan => "longer_span",
        }
    }
}

/// A bank under one setting.
#[derive(Clone, Debug, PartialEq)]
pub struct Setting {
    /// Which.
    pub variation: Variation,
    /// The bank with it.
    pub bank: Bank,
}

impl Setting {
    /// All that make sense for a bank: a margin of 0 has no half.
    pub fn all(bank: &Bank) -> Vec<Self> {
        let mut all = vec![
            Variation::AsConfigured,
            Variation::MoreCalls,
            Variation::FewerCalls,
        ];
        if bank.margin > 0.0 {
            all.extend([Variation::HalfMargin, Variation::TwiceMargin]);
        }
        if !bank.pairing.is_paired() {
            all.push(Variation::LongerSpan);
        }
        let with = |variation| Self {
            variation,
            bank: varied(bank, variation),
        };
        all.into_iter().map(with).collect()
    }

    /// For people ("false calls 10 per 90 days").
    pub fn words(&self) -> String {
        let unit = &self.bank.characteristic.unit;
        match self.variation {
            Variation::AsConfigured => "as configured".to_owned(),
            Variation::MoreCalls | Variation::FewerCalls => {
                format!("false calls {}", self.bank.budget)
            }
            Variation::HalfMargin | Variation::TwiceMargin => {
                format!("margin {} {unit}", self.bank.margin)
            }
            Variation::LongerSpan => format!("with a span of {}", self.bank.window_length()),
        }
    }
}

fn varied(bank: &Bank, variation: Variation) -> Bank {
    let mut other = bank.clone();
    match variation {
        Variation::AsConfigured => {}
        Variation::MoreCalls => other.budget = times(bank.budget, 10.0),
        Variation::FewerCalls => other.budget = times(bank.budget, 0.1),
        Variation::HalfMargin => other.margin *= 0.5,
        Variation::TwiceMargin => other.margin *= 2.0,
        Variation::LongerSpan => return with_next_span(bank),
    }
    other
}

/// More or fewer false calls, written so that people can read it: "1 per 900 days" rather than "0.1 per
/// 90 days".
fn times(budget: Budget, factor: f64) -> Budget {
    let (calls, days) = if factor < 1.0 {
        (budget.calls(), budget.days() / factor)
    } else {
        (budget.calls() * factor, budget.days())
    };
    Budget::new(calls, days).unwrap_or(budget)
}
