//! Time across: columns of equal length, the look that stands in each, and ticks by the clock on the
//! wall.

use crate::model::{Time, US_PER_S};
use crate::verdict::Digest;
use crate::web::format::Times;

/// Most columns: two pixels each on a phone, a look in each five minutes of a shift.
pub const MOST_COLUMNS: usize = 96;
/// Fewest columns, so that a young bank's picture is no wall of blocks.
const FEWEST_COLUMNS: i64 = 24;
/// Most ticks that fit beside each other on a phone.
const MOST_TICKS: i64 = 6;
/// Steps between ticks, in minutes.
const STEPS_MIN: [i64; 12] = [5, 10, 15, 30, 60, 120, 180, 240, 360, 720, 1440, 10_080];

/// A stretch of time in columns.
#[derive(Clone, Debug)]
pub struct TimeAxis {
    /// Start.
    pub from: Time,
    /// End.
    pub to: Time,
    /// How many columns.
    pub columns: usize,
}

impl TimeAxis {
    /// From `from` to `to` in columns that hold about a look each, as far as they fit.
    pub fn new(from: Time, to: Time, look_every_us: i64) -> Self {
        let length = to.us_since(from).max(1);
        let looks = length / look_every_us.max(1);
        let columns = looks.clamp(FEWEST_COLUMNS, MOST_COLUMNS as i64);
        Self {
            from,
            to,
            columns: usize::try_from(columns).unwrap_or(1),
        }
    }

    /// The share of the way from start to end, held at the ends.
    pub fn share(&self, at: Time) -> f64 {
        let length = self.to.us_since(self.from).max(1) as f64;
        (at.us_since(self.from) as f64 / length).clamp(0.0, 1.0)
    }

    /// When a column ends.
    pub fn end_of(&self, column: usize) -> Time {
        let length = self.to.us_since(self.from) as f64;
        let share = (column + 1) as f64 / self.columns.max(1) as f64;
        self.from.plus_us((length * share) as i64)
    }

    /// The newest look of each column. A look also stands in the columns after it until it is two
    /// looks old, because looks and columns do not keep step.
    pub fn place<'a>(&self, looks: &[&'a Digest], look_every_us: i64) -> Vec<Option<&'a Digest>> {
        let mut newest = looks.iter().peekable();
        let mut standing: Option<&'a Digest> = None;
        let mut places = Vec::with_capacity(self.columns);
        for column in 0..self.columns {
            let end = self.end_of(column);
            while let Some(look) = newest.next_if(|l| l.at <= end) {
                standing = Some(look);
            }
            let start = self.end_of(column).plus_us(-self.column_us());
            // A column may have no look of its own because it is narrower than the time between two.
            let limit = look_every_us.saturating_mul(2);
            standing = standing.filter(|l| start.us_since(l.at) <= limit);
            places.push(standing);
        }
        places
    }

    /// Ticks as shares with their labels.
    pub fn ticks(&self, times: &Times) -> Vec<(f64, String)> {
        let length = self.to.us_since(self.from);
        let us = |minutes: i64| minutes * 60 * US_PER_S;
        let fits = |step: &i64| length / us(*step) <= MOST_TICKS;
        let step = us(STEPS_MIN.into_iter().find(fits).unwrap_or(43_200));
        let mut at = times.hour_start(self.from);
        let mut ticks = Vec::new();
        while at <= self.to && ticks.len() < 100 {
            if at >= self.from {
                ticks.push((self.share(at), times.short(at)));
            }
            at = at.plus_us(step);
        }
        ticks
    }

    fn column_us(&self) -> i64 {
        let columns = i64::try_from(self.columns.max(1)).unwrap_or(1);
        self.to.us_since(self.from) / columns
    }
}
