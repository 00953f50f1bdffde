//! A source that an incident is about: since when it is apart, and by how much.

use serde::{Deserialize, Serialize};

use crate::model::{SourceIx, Time};
use crate::notice::{Adjustment, NamedSource, Since};
use crate::verdict::{
    Aspect, Began, Call, Effect, Estimate, FEWEST_AFTER, Located, Moment, Yardstick,
    cleared_margin, effect_of_adjustment, locate, size_since,
};

use super::incident::Surroundings;

/// A source that is apart, or was.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Apart {
    pub source: SourceIx,
    pub located: Place,
    pub size: Estimate,
    /// The largest size seen.
    pub worst: Estimate,
    pub cleared: bool,
    /// The last adjustment since it left.
    pub adjusted: Option<Adjusted>,
}

/// An adjustment of a source that is apart.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Adjusted {
    /// When it was entered.
    pub at: Time,
    /// By how much, where that was said.
    pub by: Option<f64>,
    /// The first place in the windows that counts after it.
    pub from: i64,
    /// The size before it.
    pub before: Estimate,
}

/// Since when, in the window's order and in time.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub struct Place {
    pub start: i64,
    pub since: Since,
}

impl Apart {
    /// Those a call names, as far as the values bear it out.
    pub fn all(call: &Call, about: &Surroundings) -> Vec<Self> {
        let yard = about.yard(call.aspect, &call.reference);
        let each = call.named.iter();
        each.filter_map(|&s| Self::of(s, call, about, &yard))
            .collect()
    }

    fn of(source: SourceIx, call: &Call, about: &Surroundings, yard: &Yardstick) -> Option<Self> {
        let data = &about.exam.data;
        let located = locate(data, source, call.aspect, yard);
        let mut one = located.map(|l| Self::new(source, &l));
        // The watch remembers longer than the windows, and is right about what it called.
        let Some(began) = call.began else {
            return one;
        };
        let remembered = data.oldest_place().is_none_or(|p| began.start.place < p);
        if one.is_none() {
            let size = size_since(data, source, call.aspect, yard, began.start.place)?;
            one = Some(Self::since(source, began, size));
        } else if remembered && let Some(one) = &mut one {
            one.located = Place::from(began);
        }
        one
    }

    fn since(source: SourceIx, began: Began, size: Estimate) -> Self {
        Self {
            source,
            located: Place::from(began),
            size,
            worst: size,
            cleared: false,
            adjusted: None,
        }
    }

    pub fn new(source: SourceIx, located: &Located) -> Self {
        Self {
            source,
            located: Place::of(located),
            size: located.size,
            worst: located.size,
            cleared: false,
            adjusted: None,
        }
    }

    pub fn update(&mut self, about: &Surroundings, aspect: Aspect, yard: &Yardstick) {
        let data = &about.exam.data;
        if let Some(adjusted) = self.adjusted {
            // What it was before the adjustment is over, and its start stays what it was.
            let since = size_since(data, self.source, aspect, yard, adjusted.from);
            self.size = since.unwrap_or(self.size);
            return;
        }
        // A start that has left the windows is kept: what is left would only seem to start later.
        let reaches_back = data.oldest_place().is_some_and(|p| p < self.located.start);
        if reaches_back && let Some(located) = locate(data, self.source, aspect, yard) {
            self.located = Place::of(&located);
            self.size = located.size;
        } else if let Some(size) = size_since(data, self.source, aspect, yard, self.located.start) {
            self.size = size;
        }
        if farness(aspect, &self.size) > farness(aspect, &self.worst) {
            self.worst = self.size;
        }
    }

    /// Its last adjustment, and what the values since say of it.
    pub fn adjustment(&self, about: &Surroundings, aspect: Aspect) -> Option<Adjustment> {
        let adjusted = self.adjusted.filter(|_| aspect == Aspect::Level)?;
        let ring = about.watched.state.windows.ring(self.source);
        let values = ring.iter().rev().take_while(|e| e.place >= adjusted.from);
        let values = values.count();
        let margin = about.watched.bank.margin;
        let widths = (margin, cleared_margin(margin, about.sigma()));
        let effect = if self.cleared {
            Effect::Worked
        } else {
            effect_of_adjustment(&adjusted.before, &self.size, values, widths)
        };
        Some(Adjustment {
            source: about.watched.name(self.source),
            at: adjusted.at,
            amount: adjusted.by,
            values,
            deviation: (values >= FEWEST_AFTER).then_some(self.size),
            effect,
        })
    }

    /// Its size now; what it was at worst once it is back.
    pub fn told(&self, about: &Surroundings) -> NamedSource {
        let size = if self.cleared {
            &self.worst
        } else {
            &self.size
        };
        NamedSource {
            source: about.watched.name(self.source),
            deviation: size.value,
            low: size.low,
            high: size.high,
        }
    }
}

impl From<Began> for Place {
    fn from(began: Began) -> Self {
        Self {
            start: began.start.place,
            since: Since {
                at: began.start.taken,
                earliest: began.earliest.taken,
                latest: began.latest.taken,
            },
        }
    }
}

impl Place {
    /// The same as a call has it.
    pub fn began(&self) -> Began {
        let moment = |taken| Moment {
            place: self.start,
            taken,
        };
        Began {
            start: moment(self.since.at),
            earliest: moment(self.since.earliest),
            latest: moment(self.since.latest),
        }
    }

    fn of(located: &Located) -> Self {
        Self {
            start: located.start.place,
            since: Since {
                at: located.start.taken,
                earliest: located.earliest.taken,
                latest: located.latest.taken,
            },
        }
    }
}

/// How far apart a size is, whichever its direction.
pub fn farness(aspect: Aspect, size: &Estimate) -> f64 {
    match aspect {
        Aspect::Level => size.value.abs(),
        Aspect::Spread => size.value.ln().abs(),
    }
}
