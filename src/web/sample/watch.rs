//! The sample's watch: as if it had learnt from the sample's values.

use crate::engine::WatchView;
use crate::model::{Bank, SourceIx};
use crate::verdict::watch::thresholds::{Basis, account, thresholds};
use crate::verdict::watch::{Figures, Part, Progress, Reading};

use super::Story;

/// Sd of a value, in margins, and what the watch needs to learn it.
const SIGMA: f64 = 1.5;
const NEEDED: u32 = 500;

/// The watch of a bank with so many values per source.
pub fn watch(bank: &Bank, sources: usize, story: Story, values: usize) -> WatchView {
    let learning = (values as u32) < NEEDED;
    let basis = Basis {
        sources,
        margin_sd: 1.0 / SIGMA,
        spread_margin: bank.spread_margin,
        cycles_per_false_call: 10_800_000.0,
        phi: 0.0,
        df: 30_000.0,
    };
    let account = account(&basis, &thresholds(&basis));
    let (far, part, leading) = match story {
        Story::Spread(at, _) => (0.83, Part::Erratic, at),
        Story::Level(at, _, _) => (0.91, Part::Few, at),
        _ => (0.44, Part::Few, 0),
    };
    let reading = |entry: &crate::verdict::watch::thresholds::Entry| {
        let threshold = entry.thresholds.first().map_or(1.0, |t| t.1);
        let ratio = if entry.part == part { far } else { 0.31 };
        Reading {
            part: entry.part,
            statistic: ratio * threshold,
            threshold,
            ratio,
            leading: Some(SourceIx(leading as u16)),
        }
    };
    let readings = account.parts.iter().map(reading).collect();
    WatchView {
        progress: if learning {
            Progress::Learning {
                cycles: values as u32,
                needed: NEEDED,
            }
        } else {
            Progress::Watching
        },
        readings: if learning { Vec::new() } else { readings },
        figures: Figures {
            sigma: Some(SIGMA * bank.margin),
            from_resolution: false,
            own_sigma: Vec::new(),
            phi: 0.03,
            phi_paid: 0.03,
            df: 30_000.0,
            account: (!learning).then_some(account),
        },
    }
}
