//! Banks whose sources are shifts: values gather in the mean of the shift in which they were taken, and
//! the mean enters the windows as the shift's one value of the day.
//!
//! What must hold: a shift of a day enters once, when it is over and nothing more has come for
//! [`SETTLES_US`]; what comes for it afterwards is late and only counted. The end is judged by the time
//! the engine is given, at a look that is due, so that a replay does the same; never by the values, since
//! a broker's backlog may bring several shifts at once and mixed.
//! Deliberately absent: doubles among the raw values. One of several hundred moves no mean that matters,
//! and what the broker delivers again after a crash is refused before it comes here.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

use crate::model::{Calendar, Measurement, Name, Reason, SourceIx, Sources, Stretch, Time, Value};
use crate::window::{Accepted, Arriving};

use super::bank::Watched;

/// A shift enters when it has been over, and nothing has come for it, for this long: time enough for
/// values that wait in a gateway, and short against a shift.
const SETTLES_US: i64 = 600_000_000;

/// A shift with fewer values is not entered. The mean of 30 has less than a fifth of a single value's
/// standard deviation; one of a handful would stand for a shift that hardly produced, with several
/// times the others' noise.
pub const FEWEST_VALUES: u64 = 30;

/// The shifts that run, and what became of those before.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Shifts {
    open: Vec<Gathering>,
    /// The newest day of each source that is over, by [`SourceIx`].
    over: BTreeMap<u16, i64>,
    /// Shifts of a day that had too few values.
    pub skipped: u64,
}

/// One shift of one day, so far.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Gathering {
    pub source: SourceIx,
    day: i64,
    /// The part of the shift from which a value came last.
    from: Time,
    to: Time,
    /// When the whole shift is over.
    pub end: Time,
    /// The first value; the mean is kept relative to it, so that no digit is lost.
    origin: Value,
    pub count: u64,
    /// Mean of the values less `origin`, as it runs (Welford 1962).
    mean: f64,
    /// When the last value arrived.
    received: Time,
}

impl Gathering {
    fn take(&mut self, value: Value, now: Time) {
        self.count += 1;
        self.mean += (value.minus(self.origin) - self.mean) / self.count as f64;
        self.received = now;
    }

    /// The mean so far.
    pub fn mean(&self) -> f64 {
        self.origin.to_f64() + self.mean
    }

    fn settles(&self) -> Time {
        self.end.max(self.received).plus_us(SETTLES_US)
    }
}

impl Shifts {
    /// Those that run or are not settled, oldest end first.
    pub fn running(&self) -> impl Iterator<Item = &Gathering> {
        self.open.iter()
    }

    /// When the first of them settles.
    pub fn next_end(&self) -> Option<Time> {
        self.open.iter().map(Gathering::settles).min()
    }

    /// What was gathered of this source, or of all, no longer counts: the machine is another one now.
    pub fn forget(&mut self, source: Option<SourceIx>) {
        self.open.retain(|g| source.is_some_and(|s| g.source != s));
    }

    fn is_over(&self, source: SourceIx, day: i64) -> bool {
        self.over.get(&source.0).is_some_and(|over| day <= *over)
    }

    /// The place of what gathers at this time.
    fn at(&self, taken: Time) -> Option<usize> {
        let runs = |g: &Gathering| g.from <= taken && taken < g.to;
        self.open.iter().position(runs)
    }

    /// Where a value of this stretch gathers: what is there already, from another part of the shift, or
    /// something new in the order of the ends.
    fn enter(&mut self, new: Gathering) -> usize {
        let same = |g: &Gathering| (g.source, g.day) == (new.source, new.day);
        if let Some(there) = self.open.iter().position(same) {
            (self.open[there].from, self.open[there].to) = (new.from, new.to);
            return there;
        }
        let place = self.open.partition_point(|g| g.end <= new.end);
        self.open.insert(place, new);
        place
    }

    /// Takes out what has settled, oldest end first.
    fn settled(&mut self, now: Time) -> Vec<Gathering> {
        let all = std::mem::take(&mut self.open);
        let (settled, open) = all.into_iter().partition(|g| g.settles() <= now);
        self.open = open;
        settled
    }
}

impl Watched {
    /// Takes a value into the mean of its shift.
    ///
    /// # Errors
    /// [`Reason::OutsideShifts`], and [`Reason::UnknownSource`] for a shift that is not configured.
    pub fn gather(
        &mut self,
        calendar: &Calendar,
        m: &Measurement,
        (taken, now): (Time, Time),
    ) -> Result<Accepted, Reason> {
        let place = match self.state.shifts.at(taken) {
            Some(place) => place,
            None => {
                let stretch = calendar.at(taken).ok_or(Reason::OutsideShifts)?;
                let new = self.gathering(calendar, &stretch, m.value, now)?;
                if self.state.shifts.is_over(new.source, new.day) {
                    return Ok(Accepted::Late);
                }
                self.state.shifts.enter(new)
            }
        };
        let gathering = &mut self.state.shifts.open[place];
        gathering.take(m.value, now);
        let source = gathering.source;
        let known = &mut self.state.sources[source.index()];
        known.last_received = Some(now);
        if std::mem::take(&mut known.silent) {
            self.state.windows.expect(source, true);
        }
        Ok(Accepted::InTurn)
    }

    fn gathering(
        &self,
        calendar: &Calendar,
        stretch: &Stretch,
        first: Value,
        now: Time,
    ) -> Result<Gathering, Reason> {
        let name = calendar.names().nth(stretch.shift);
        let source = name.and_then(|name| self.source_named(name));
        let end = calendar.end(stretch.shift, stretch.day);
        Ok(Gathering {
            source: source.ok_or(Reason::UnknownSource)?,
            day: stretch.day,
            from: stretch.from,
            to: stretch.to,
            end: end.unwrap_or(stretch.to),
            origin: first,
            count: 0,
            mean: 0.0,
            received: now,
        })
    }

    /// Every shift that has settled enters its day's value, or is skipped.
    pub fn end_shifts(&mut self, now: Time) {
        for gathering in self.state.shifts.settled(now) {
            let over = self.state.shifts.over.entry(gathering.source.0);
            let over = over.or_insert(gathering.day);
            *over = (*over).max(gathering.day);
            let value = Value::from_f64(gathering.mean());
            let (Ok(value), true) = (value, gathering.count >= FEWEST_VALUES) else {
                self.state.shifts.skipped += 1;
                continue;
            };
            let arriving = Arriving {
                source: gathering.source,
                value,
                taken: gathering.end,
                time_given: true,
                cycle: Some(gathering.day),
            };
            // Each day of a shift comes once, so nothing is left to refuse.
            if self.enter(&arriving, gathering.received).is_err() {
                self.state.shifts.skipped += 1;
            }
        }
    }

    /// After a restart: what gathers under a calendar that was changed meanwhile stands for another
    /// stretch of time and is given up.
    pub fn fit_shifts(&mut self) {
        let Sources::Shifts(calendar) = &self.bank.sources else {
            self.state.shifts = Shifts::default();
            return;
        };
        let names: Vec<&Name> = calendar.names().collect();
        let sources = &self.state.sources;
        self.state.shifts.open.retain(|g| {
            let name = sources.get(g.source.index()).map(|s| &s.name);
            let shift = names.iter().position(|n| Some(*n) == name);
            shift.and_then(|shift| calendar.end(shift, g.day)) == Some(g.end)
        });
    }
}
