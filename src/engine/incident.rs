//! An incident: sources that left the even set, followed until there is evidence that they are back.

use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{Name, SourceIx, Time, address_name};
use crate::notice::{
    Compared, Facts, Handling, Happening, Kind, NamedSource, Notice, Priority, SPREAD_UNIT, State,
};
use crate::stats::dist;
use crate::verdict::{
    Aspect, Call, Causes, Estimate, Examination, Yardstick, cost_per_hour, locate, returned,
    values_to_clear,
};
use crate::window::Windows;

use super::Plant;
use super::apart::{Adjusted, Apart, farness};
use super::bank::Watched;
use super::papers::Sent;

/// A source whose values lie outside the limits this often makes the notice a high one.
const MUCH_OUTSIDE: f64 = 0.01;

/// One incident and its notice.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Incident {
    pub notice: Arc<Notice>,
    pub aspect: Aspect,
    pub apart: Vec<Apart>,
    /// Who the named ones are compared with.
    pub reference: Vec<SourceIx>,
    /// The newest place in the windows at the call: evidence of a return comes from later ones.
    pub called_at: i64,
    /// The notice as it was last sent, and when.
    pub sent: Sent,
}

/// Names may change over this many values after the call, or over this many times those before it.
const FEWEST_TO_SETTLE: usize = 60;
const SETTLE_FACTOR: usize = 3;

/// What an incident needs to know of its bank.
pub struct Surroundings<'a> {
    pub plant: &'a Plant,
    pub watched: &'a Watched,
    pub exam: &'a Examination,
    pub now: Time,
    pub interval_us: Option<i64>,
    /// Sources that another open incident is about.
    pub taken: &'a [SourceIx],
}

impl Surroundings<'_> {
    pub fn yard<'b>(&self, aspect: Aspect, reference: &'b [SourceIx]) -> Yardstick<'b> {
        Yardstick {
            reference,
            margin: match aspect {
                Aspect::Level => self.watched.bank.margin,
                Aspect::Spread => self.watched.bank.spread_margin,
            },
            factor: self.exam.factor,
            family: self.exam.data.sources.len(),
        }
    }

    /// Standard deviation within sources as the longest look that could tell it.
    pub fn sigma(&self) -> f64 {
        let told = self.exam.looks.iter().rev().find(|l| l.sigma > 0.0);
        told.map_or(0.0, |l| l.sigma)
    }
}

impl Incident {
    /// Begins an incident; `None` when nothing in the values bears the call out.
    pub fn begin(call: &Call, id: Name, about: &Surroundings) -> Option<Self> {
        let apart = Apart::all(call, about);
        let first = apart.first()?;
        let notice = Notice {
            id,
            plant: about.plant.name.clone(),
            bank: about.watched.bank.name.clone(),
            kind: kind(call, about),
            state: State::Normal,
            priority: Priority::Medium,
            sources: Vec::new(),
            unit: match call.aspect {
                Aspect::Level => about.watched.bank.characteristic.unit.clone(),
                Aspect::Spread => SPREAD_UNIT.into(),
            },
            since: first.located.since,
            raised: about.now,
            changed: about.now,
            returned: None,
            acknowledged: None,
            subject: String::new(),
            text: String::new(),
            advice: String::new(),
            url: format!(
                "{}/banks/{}",
                about.plant.pages,
                address_name(&about.watched.bank.name)
            ),
            span: call.span,
            handling: Handling::default(),
            pattern: call.causes.pattern.clone(),
            slip: call.causes.slip,
            common_movement: call.causes.common_movement,
            even_mean: None,
            cost_per_hour: None,
            adjustment: None,
        };
        let mut incident = Self {
            notice: Arc::new(notice),
            aspect: call.aspect,
            called_at: newest_place(&about.watched.state.windows),
            reference: call.reference.clone(),
            apart,
            sent: None,
        };
        incident.happen(Happening::Occurs, about.now);
        incident.tell(about);
        Some(incident)
    }

    /// Whether it still holds.
    pub fn is_active(&self) -> bool {
        self.notice.holds()
    }

    /// The sources it is about now.
    pub fn about(&self) -> Vec<SourceIx> {
        let holding = self.apart.iter().filter(|a| self.is_active() && !a.cleared);
        holding.map(|a| a.source).collect()
    }

    /// How far a source is apart now, when it is about that source.
    pub fn size_of(&self, source: SourceIx) -> Option<Estimate> {
        let one = self.apart.iter().find(|a| a.source == source && !a.cleared);
        one.filter(|_| self.is_active()).map(|a| a.size)
    }

    /// Whether it is about a source now.
    pub fn is_about(&self, source: SourceIx) -> bool {
        self.about().contains(&source)
    }

    /// Sources that are no longer in the configuration cannot come back: they count as cleared, and so
    /// does everybody when nobody is left to be compared with. The next look ends the incident then.
    pub fn forget(&mut self, gone: &dyn Fn(SourceIx) -> bool) {
        self.reference.retain(|s| !gone(*s));
        let alone = self.reference.is_empty();
        for one in &mut self.apart {
            one.cleared |= alone || gone(one.source);
        }
    }

    /// Takes in what a look says: sizes, starts, sources that join, sources that are back. Returns
    /// where the evidence of each return begins.
    pub fn follow(&mut self, about: &Surroundings) -> Vec<(SourceIx, i64)> {
        match about
            .exam
            .renamed
            .as_ref()
            .filter(|_| self.names_settle(about))
        {
            Some(call) => self.rename(call, about),
            None => self.join(about),
        }
        let mut back = Vec::new();
        let yard = about.yard(self.aspect, &self.reference);
        for one in self.apart.iter_mut().filter(|a| !a.cleared) {
            let data = &about.exam.data;
            let after = one.adjusted.map_or(i64::MIN, |a| a.from.saturating_sub(1));
            let after = after.max(self.called_at);
            match returned(data, one.source, self.aspect, &yard, after) {
                Some(from) => {
                    one.cleared = true;
                    back.push((one.source, from.place));
                }
                None => one.update(about, self.aspect, &yard),
            }
        }
        if self.apart.iter().all(|a| a.cleared) {
            self.happen(about.plant.manners.returns(), about.now);
        }
        self.tell(about);
        back
    }

    /// What it is about, as a call that can be named again.
    pub fn as_call(&self) -> Option<Call> {
        let first = self.apart.iter().min_by_key(|a| a.located.start)?;
        (self.aspect == Aspect::Level).then(|| Call {
            aspect: self.aspect,
            named: self.about(),
            reference: self.reference.clone(),
            span: self.notice.span,
            began: Some(first.located.began()),
            causes: Causes::default(),
        })
    }

    /// Whether names may still change: a first name rests on few values, and those who moved less are seen
    /// later. Not once somebody was adjusted or is back, because the values since then mix two states.
    fn names_settle(&self, about: &Surroundings) -> bool {
        let settled = self.apart.iter().any(|a| a.cleared || a.adjusted.is_some());
        let Some(first) = self.apart.iter().map(|a| a.located.start).min() else {
            return false;
        };
        let since = |place: i64| about.exam.data.values_since(place);
        let before = since(first).saturating_sub(since(self.called_at));
        self.aspect == Aspect::Level
            && !settled
            && since(self.called_at) <= FEWEST_TO_SETTLE.max(SETTLE_FACTOR * before)
    }

    /// Takes the names that the values since the start have now, and what explains them.
    fn rename(&mut self, call: &Call, about: &Surroundings) {
        let free = |s: &&SourceIx| !about.taken.contains(s);
        let named: Vec<SourceIx> = call.named.iter().filter(free).copied().collect();
        if named.is_empty() {
            return;
        }
        let joining = Call {
            named: named
                .iter()
                .copied()
                .filter(|s| !self.is_about(*s))
                .collect(),
            ..call.clone()
        };
        self.apart.retain(|a| named.contains(&a.source));
        self.apart.extend(Apart::all(&joining, about));
        self.reference.clone_from(&call.reference);
        let kind = kind(call, about);
        let notice = Arc::make_mut(&mut self.notice);
        notice.kind = kind;
        notice.pattern.clone_from(&call.causes.pattern);
        notice.slip = call.causes.slip;
        notice.common_movement = call.causes.common_movement;
    }

    /// Sources that the look names besides, each beyond chance at the look's own share of the budget:
    /// the look is asked again and again, so the names' own error rate would add up.
    fn join(&mut self, about: &Surroundings) {
        let Some(call) = about.exam.calls.iter().find(|c| c.aspect == self.aspect) else {
            return;
        };
        for &source in &call.named {
            let known = self.apart.iter().find(|a| a.source == source);
            if known.is_some_and(|a| !a.cleared) || about.taken.contains(&source) {
                continue;
            }
            let others = |s: &SourceIx| *s != source;
            let rest: Vec<SourceIx> = self.reference.iter().copied().filter(others).collect();
            let yard = about.yard(self.aspect, &rest);
            let Some(located) = locate(&about.exam.data, source, self.aspect, &yard) else {
                continue;
            };
            if located.p < share(about, self.aspect) {
                // One that was back and left again starts anew.
                self.apart.retain(|a| a.source != source);
                self.apart.push(Apart::new(source, &located));
                self.reference = rest;
            }
        }
    }

    /// Takes in what the watch calls while this incident is open; says whether anybody joined.
    pub fn admit(&mut self, call: &Call, about: &Surroundings) -> bool {
        let joining = Apart::all(call, about);
        if joining.is_empty() {
            return false;
        }
        for one in joining {
            self.reference.retain(|s| *s != one.source);
            self.apart.retain(|a| a.source != one.source);
            self.apart.push(one);
        }
        self.tell(about);
        true
    }

    /// A source that it is about was adjusted: evidence counts from `from` on.
    pub fn adjusted(&mut self, source: SourceIx, by: Option<f64>, at: Time, from: i64) {
        if !self.is_about(source) {
            return;
        }
        if let Some(one) = self.apart.iter_mut().find(|a| a.source == source) {
            one.adjusted = Some(Adjusted {
                at,
                by,
                from,
                before: one.size,
            });
        }
    }

    /// Another product: evidence counts from `from` on.
    pub fn changed_over(&mut self, from: i64) {
        self.called_at = self.called_at.max(from.saturating_sub(1));
    }

    fn happen(&mut self, happening: Happening, now: Time) {
        Arc::make_mut(&mut self.notice).happen(happening, now);
    }

    /// Puts the present figures into the notice's fields and words.
    fn tell(&mut self, about: &Surroundings) {
        let mut named: Vec<&Apart> = self.apart.iter().filter(|a| !a.cleared).collect();
        if named.is_empty() {
            named = self.apart.iter().collect();
        }
        named.sort_by(|a, b| {
            farness(self.aspect, &b.size).total_cmp(&farness(self.aspect, &a.size))
        });
        let sources: Vec<NamedSource> = named.iter().map(|a| a.told(about)).collect();
        let adjusted = named.iter().filter(|a| a.adjusted.is_some());
        let newest = adjusted.max_by_key(|a| a.adjusted.map(|a| a.at));
        let adjustment = newest.and_then(|a| a.adjustment(about, self.aspect));
        let all: Vec<SourceIx> = self.apart.iter().map(|a| a.source).collect();
        let since = named[0].located.since;
        let facts = Facts {
            bank: &about.watched.bank,
            zone: &about.plant.zone,
            kind: self.notice.kind,
            sources: &sources,
            since,
            others: self.reference.len(),
            compared: if is_pair(&all, &self.reference) {
                Compared::Mutually
            } else {
                Compared::of(&about.watched.bank, self.notice.kind)
            },
            even_mean: self.even_mean(about),
            pattern: self.notice.pattern.as_ref(),
            slip: self.notice.slip,
            common_movement: self.notice.common_movement,
            cost_per_hour: cost_per_hour(&about.watched.bank, &about.exam.looks, about.interval_us),
            clears_in_us: self.clears_in_us(about),
            returned: self.notice.returned,
            adjustment: adjustment.as_ref(),
            url: &self.notice.url,
        };
        let words = facts.words();
        let (even_mean, cost) = (facts.even_mean, facts.cost_per_hour);
        let priority = self.priority(about, &sources);
        let changed = self.notice.sources != sources || self.notice.since != since;
        let notice = Arc::make_mut(&mut self.notice);
        if changed {
            notice.changed = about.now;
        }
        notice.even_mean = even_mean;
        notice.cost_per_hour = cost;
        notice.adjustment = adjustment;
        notice.sources = sources;
        notice.since = since;
        notice.priority = priority;
        notice.subject = words.subject;
        notice.advice = words.advice;
        notice.text = words.text;
    }

    /// Mean of the reference over the span that called: long enough to be sure, short enough for "now".
    fn even_mean(&self, about: &Surroundings) -> Option<f64> {
        let looks = about.exam.looks.iter().filter(|l| !l.sources.is_empty());
        let look = looks.min_by_key(|l| l.span.abs_diff(self.notice.span))?;
        let even = look
            .sources
            .iter()
            .filter(|s| self.reference.contains(&s.source));
        let (n, sum) = even.fold((0.0, 0.0), |(n, sum), s| (n + 1.0, sum + s.mean));
        (n > 0.0).then(|| sum / n)
    }

    /// How long a full return takes to prove, in time.
    fn clears_in_us(&self, about: &Surroundings) -> Option<i64> {
        let yard = about.yard(self.aspect, &self.reference);
        let values = values_to_clear(self.aspect, &yard, about.sigma());
        let next_look = about.watched.bank.look_every_us;
        Some((values * about.interval_us? as f64) as i64 + next_look)
    }

    /// By consequence: how many of a source's values are expected outside the limits, how many
    /// sources there are, and whether the size matters at all beside the noise.
    fn priority(&self, about: &Surroundings, sources: &[NamedSource]) -> Priority {
        let sigma = about.sigma();
        let outside = sources
            .iter()
            .map(|s| self.share_outside(about, s, sigma))
            .fold(0.0, f64::max);
        if outside > MUCH_OUTSIDE || self.notice.kind == Kind::BankSplit {
            return Priority::High;
        }
        let small = |s: &NamedSource| s.deviation.abs() < 0.5 * sigma;
        if self.aspect == Aspect::Level && sources.iter().all(small) {
            return Priority::Low;
        }
        Priority::Medium
    }

    fn share_outside(&self, about: &Surroundings, s: &NamedSource, sigma: f64) -> f64 {
        let c = &about.watched.bank.characteristic;
        let centre = self.even_mean(about).unwrap_or(0.0);
        let (mean, sd) = match self.aspect {
            Aspect::Level => (centre + s.deviation, sigma),
            Aspect::Spread => (centre, sigma * s.deviation),
        };
        if sd <= 0.0 {
            return 0.0;
        }
        let below = c.lower.map_or(0.0, |l| dist::normal::sf((mean - l) / sd));
        let above = c.upper.map_or(0.0, |u| dist::normal::sf((u - mean) / sd));
        below + above
    }
}

/// Whether the sources are compared only with each other: of two, nobody is the culprit.
fn is_pair(named: &[SourceIx], reference: &[SourceIx]) -> bool {
    named.iter().any(|s| reference.contains(s))
}

fn kind(call: &Call, about: &Surroundings) -> Kind {
    match call.aspect {
        Aspect::Level if is_pair(&call.named, &call.reference) => Kind::LevelApart,
        Aspect::Spread => Kind::SpreadApart,
        // From four sources on, half of them apart means two groups and no culprit.
        // Compared with one reference source, how many are apart says nothing of a split.
        Aspect::Level if about.watched.bank.reference.is_some() => Kind::LevelApart,
        Aspect::Level
            if call.named.len() + call.reference.len() >= 4
                && call.named.len() >= call.reference.len() =>
        {
            Kind::BankSplit
        }
        Aspect::Level => Kind::LevelApart,
    }
}

fn share(about: &Surroundings, aspect: Aspect) -> f64 {
    let shares = about.exam.shares;
    match aspect {
        Aspect::Level => shares.level,
        Aspect::Spread => shares.spread,
    }
}

/// The newest place in any window.
fn newest_place(windows: &Windows) -> i64 {
    let newest = windows.rings().iter().filter_map(|r| r.newest());
    newest.map(|e| e.place).max().unwrap_or(i64::MIN)
}
