//! The watch of a bank whose sources share cycles: every closed cycle goes to it, and when one of its
//! parts crosses its threshold a call is made at once, with the look of the same data beside it.
//!
//! What must hold: the watch sees each closed cycle once, in order; sources that an open notice is
//! about are set apart, so that they neither hide nor accuse anybody; thresholds follow the bank's
//! rate of cycles only when it has lastingly changed.

use crate::model::{Bank, SourceIx, Time};
use crate::verdict::watch::{Crossing, Cycle, Frozen, Progress, Terms, Watch};
use crate::verdict::{Aspect, Need};

use super::Plant;
use super::bank::Watched;
use super::look::Looked;

/// The rate of cycles has changed when it is off by more than this share …
const RATE_TOLERANCE: f64 = 0.2;

/// … for this long.
const RATE_LASTS_US: i64 = 3_600_000_000;

/// Rate of cycles for which the thresholds hold.
#[derive(Clone, Copy, Debug, Default, PartialEq, serde::Serialize, serde::Deserialize)]
pub struct Pace {
    /// Time between cycles for which the watch is tuned.
    interval_us: Option<i64>,
    /// Since when the bank runs at another one.
    left: Option<Time>,
}

impl Pace {
    /// Follows the bank's interval; says whether the thresholds must follow.
    fn follow(&mut self, interval_us: i64, now: Time) -> bool {
        let Some(tuned) = self.interval_us else {
            self.interval_us = Some(interval_us);
            return true;
        };
        let ratio = interval_us as f64 / tuned.max(1) as f64;
        if (1.0 / (1.0 + RATE_TOLERANCE)..=1.0 + RATE_TOLERANCE).contains(&ratio) {
            self.left = None;
            return false;
        }
        let since = *self.left.get_or_insert(now);
        let lasts = now.us_since(since) >= RATE_LASTS_US;
        if lasts {
            self.interval_us = Some(interval_us);
            self.left = None;
        }
        lasts
    }
}

impl Watched {
    /// Whether the watch decides when to call. While it learns, and where sources share no cycle, the
    /// look does.
    pub fn watch_decides(&self) -> bool {
        let watch = self.state.watch.as_ref();
        watch.is_some_and(|w| w.progress() == Progress::Watching)
    }

    /// Gives the watch every cycle that has closed; a crossing becomes a call.
    pub fn watch(&mut self, plant: &Plant, now: Time) -> Option<Looked> {
        let closed = self.state.windows.take_closed();
        if closed.is_empty() {
            return None;
        }
        let crossing = self.step_over(&closed)?;
        Some(self.call(plant, now, &crossing))
    }

    /// The first crossing; what follows it in the same turn is seen with the named sources set apart,
    /// which is the next step's business.
    fn step_over(&mut self, closed: &[i64]) -> Option<Crossing> {
        let compared = self.compared();
        let places: Vec<f64> = self.known_places();
        let active = self.state.incidents.iter().any(|i| i.is_active());
        let watch = self.state.watch.as_mut()?;
        watch.compare(&compared);
        watch.freeze(if active { Frozen::Yes } else { Frozen::No });
        let mut values = Vec::with_capacity(compared.len());
        let mut first = None;
        for &place in closed {
            if let Some(taken) = self.state.windows.cycle(place, &mut values) {
                let each = values.iter_mut().zip(&places);
                each.for_each(|(value, usual)| *value -= usual);
                let cycle = Cycle {
                    place,
                    taken,
                    values: &values,
                };
                let crossing = watch.step(&cycle);
                first = first.or(crossing);
            }
        }
        first
    }

    /// Where sources are known to stand; not a number where that is not known, so that it is not compared.
    fn known_places(&self) -> Vec<f64> {
        let place = |s| self.usual(SourceIx(s as u16)).map_or(f64::NAN, |u| u.place);
        (0..self.state.sources.len()).map(place).collect()
    }

    /// Which sources the watch compares: those that take part and that no open notice is
    /// about; a silent one is compared while it delivers.
    fn compared(&self) -> Vec<bool> {
        let mut compared: Vec<bool> = self.state.sources.iter().map(|s| s.takes_part()).collect();
        let about = self.state.incidents.iter().flat_map(|i| i.about());
        for source in about.chain(self.out_of_judgement()) {
            compared[source.index()] = false;
        }
        compared
    }

    fn call(&mut self, plant: &Plant, now: Time, crossing: &Crossing) -> Looked {
        self.premises = Some(self.premises_of(now, Some(crossing)));
        let exam = self.examine(now, Need::WholeSpan, Some(crossing));
        self.conclude(plant, now, exam)
    }

    /// Lets the thresholds follow the bank's rate of cycles, at looks.
    pub fn follow_pace(&mut self, now: Time) {
        if let Some(interval_us) = self.interval_us()
            && self.state.pace.follow(interval_us.max(1), now)
        {
            self.retune();
        }
    }

    /// Thresholds for the bank's margins and budget at the rate of cycles they hold for.
    pub fn retune(&mut self) {
        let terms = watch_terms(&self.bank, self.state.pace.interval_us);
        if let Some(watch) = &mut self.state.watch {
            watch.tune(terms);
        }
    }

    /// A source is back: it is watched with at least this margin from now on.
    pub fn watch_with(&mut self, source: SourceIx, aspect: Aspect, margin: f64) {
        if aspect == Aspect::Level {
            let known = &mut self.state.sources[source.index()].cleared_margin;
            *known = known.max(margin);
            if let Some(watch) = &mut self.state.watch {
                watch.set_margin(source, margin);
            }
        }
    }
}

/// A watch for a bank that nothing is known of; `None` where the looks decide for good.
pub fn watch_for(bank: &Bank) -> Option<Watch> {
    let watched = bank.is_watched();
    watched.then(|| Watch::new(watch_terms(bank, None)))
}

/// What the watch must know of a bank whose cycles are `interval_us` apart. Before that is known, one
/// cycle a look stands in; the look decides then.
pub fn watch_terms(bank: &Bank, interval_us: Option<i64>) -> Terms {
    let interval_us = interval_us.unwrap_or(bank.look_every_us);
    Terms {
        margin: bank.margin,
        spread_margin: bank.spread_margin,
        cycles_per_false_call: 1.0 / (bank.budget.per_us() * interval_us as f64),
        resolution: bank.characteristic.resolution,
    }
}
