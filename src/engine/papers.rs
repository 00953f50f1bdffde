//! A bank's notices as papers, whatever they are about: those of incidents, those of conditions, and the
//! newest that are over.
//!
//! Owns what happens to them by time alone (a shelving ends, the line settles, one is sent again), and
//! what people do with them. What must hold: this is a function of the state and the time, so a replay
//! does the same. Deliberately absent: what begins and ends a notice (incidents and conditions).

use std::collections::VecDeque;
use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::model::{Name, Time};
use crate::notice::{CallOutcome, Deed, Happening, Kind, Manners, Notice, Said};

use super::bank::{State, Watched};

/// Notices that are over and can still be commented on.
const PAST: usize = 30;

/// Updates of an open notice are sent at most this often.
const SEND_EVERY_US: i64 = 10_000_000;

/// A notice as it was last sent, and when.
pub type Sent = Option<(Time, Arc<Notice>)>;

/// What the bank's calls came to, as people say.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
pub struct Tally {
    /// Calls made.
    pub calls: u64,
    /// Calls of which somebody said what came of them.
    pub told: u64,
    /// Calls with nothing found.
    pub nothing_found: u64,
}

impl Tally {
    fn count(&mut self, before: Option<CallOutcome>, after: Option<CallOutcome>) {
        let told = |o: Option<CallOutcome>| u64::from(o.is_some());
        let nothing = |o| u64::from(o == Some(CallOutcome::NothingFound));
        self.told = (self.told + told(after)).saturating_sub(told(before));
        self.nothing_found = (self.nothing_found + nothing(after)).saturating_sub(nothing(before));
    }
}

/// What became of a deed.
pub struct Acted {
    pub notice: Arc<Notice>,
    pub news: bool,
}

impl State {
    /// Every notice that is not over, those of incidents first.
    pub fn papers(&self) -> impl Iterator<Item = &Arc<Notice>> {
        let incidents = self.incidents.iter().map(|i| &i.notice);
        incidents.chain(self.conditions.iter().map(|c| &c.notice))
    }

    /// The same, with what was last sent.
    pub fn papers_mut(&mut self) -> impl Iterator<Item = (&mut Arc<Notice>, &mut Sent)> {
        let incidents = self.incidents.iter_mut();
        let incidents = incidents.map(|i| (&mut i.notice, &mut i.sent));
        let conditions = self.conditions.iter_mut();
        incidents.chain(conditions.map(|c| (&mut c.notice, &mut c.sent)))
    }

    /// Notices that are over leave, and stay within reach for a while.
    pub fn file_away(&mut self) {
        let is_over = |n: &Arc<Notice>| !n.state.is_open();
        let over: Vec<Arc<Notice>> = self.papers().filter(|n| is_over(n)).cloned().collect();
        self.incidents.retain(|i| i.notice.state.is_open());
        self.conditions.retain(|c| c.notice.state.is_open());
        self.past.extend(over);
        while self.past.len() > PAST {
            self.past.pop_front();
        }
    }

    /// A notice that begins while one of its kind about the same sources is set aside takes that over:
    /// who shelved it meant this too.
    pub fn take_over(&mut self, notice: &mut Notice, now: Time) {
        let named: Vec<&Name> = notice.sources.iter().map(|s| &s.source).collect();
        let meant = |old: &Notice| {
            let about = |name: &&Name| old.sources.iter().any(|s| s.source == **name);
            old.kind == notice.kind && !old.holds() && named.iter().all(about)
        };
        let set_aside = |n: &Notice| n.state == crate::notice::State::Shelved;
        let found = self
            .papers_mut()
            .find(|(old, _)| meant(old) && set_aside(old));
        let Some((old, _)) = found else {
            return;
        };
        let until = old.handling.shelved_until;
        Arc::make_mut(old).happen(Happening::Unshelved, now);
        notice.happen(Happening::Shelved, now);
        notice.handling.shelved_until = until;
    }

    /// Does something with a notice; `None` when there is none of this id.
    pub fn act(
        &mut self,
        id: &str,
        deed: Deed,
        said: Said,
        manners: &Manners,
    ) -> Option<Result<Acted, String>> {
        let open = self.papers_mut().map(|(notice, _)| notice);
        let found = open.into_iter().find(|n| &*n.id == id);
        let acted = match found {
            Some(notice) => act(notice, deed, said, manners),
            None => {
                let notice = self.past.iter_mut().find(|n| &*n.id == id)?;
                act(notice, deed, said, manners)
            }
        };
        let (before, acted) = match acted {
            Ok(acted) => acted,
            Err(why) => return Some(Err(why)),
        };
        if acted.notice.kind.is_call() {
            self.tally.count(before, acted.notice.handling.outcome);
        }
        Some(Ok(acted))
    }
}

fn act(
    notice: &mut Arc<Notice>,
    deed: Deed,
    said: Said,
    manners: &Manners,
) -> Result<(Option<CallOutcome>, Acted), String> {
    let before = notice.handling.outcome;
    let news = Arc::make_mut(notice).act(deed, said, manners)?;
    let notice = notice.clone();
    Ok((before, Acted { notice, news }))
}

impl Watched {
    /// Whether the line holds back a kind of notice now.
    pub fn holds_back(&self, kind: Kind, manners: &Manners, now: Time) -> bool {
        let line = &self.state.line;
        let since = line.started.max(line.changed_over);
        let settles = since.is_some_and(|at| now.us_since(at) < manners.settling_us);
        // What does not get in has nothing to do with the line.
        kind != Kind::IntakeTrouble && (line.stopped.is_some() || settles)
    }

    /// What time brings to a notice, if it brings anything.
    fn brought(&self, notice: &Notice, manners: &Manners, now: Time) -> Option<Notice> {
        let mut after = notice.clone();
        let design = if self.holds_back(notice.kind, manners, now) {
            Happening::HeldBack
        } else {
            Happening::LetGo
        };
        let held = after.happen(design, now);
        let over = after.end_shelving(now);
        (held || over).then_some(after)
    }

    /// Whether time brings anything to a notice of the bank.
    pub fn wants_upkeep(&self, manners: &Manners, now: Time) -> bool {
        let due = |n: &Arc<Notice>| self.brought(n, manners, now).is_some();
        let repeats = |(n, sent): (&Arc<Notice>, &Sent)| is_repeat(n, sent, manners, now);
        let incidents = self.state.incidents.iter().map(|i| (&i.notice, &i.sent));
        let conditions = self.state.conditions.iter().map(|c| (&c.notice, &c.sent));
        self.state.papers().any(due) || incidents.chain(conditions).any(repeats)
    }

    /// Does what time brings; gives the notices that changed.
    pub fn upkeep(&mut self, manners: &Manners, now: Time) -> Vec<Arc<Notice>> {
        let all: Vec<Arc<Notice>> = self.state.papers().cloned().collect();
        let brought: Vec<Option<Notice>> =
            all.iter().map(|n| self.brought(n, manners, now)).collect();
        let mut changed = Vec::new();
        for ((notice, _), after) in self.state.papers_mut().zip(brought) {
            if let Some(after) = after {
                *notice = Arc::new(after);
                changed.push(notice.clone());
            }
        }
        changed
    }

    /// The next moment that time brings something, as far as it is known beforehand.
    pub fn next_upkeep(&self, manners: &Manners) -> Option<Time> {
        let shelved = self.state.papers();
        let shelved = shelved.filter_map(|n| n.handling.shelved_until).min();
        let line = &self.state.line;
        let any = self.state.papers().next().is_some();
        let settled = line.started.max(line.changed_over);
        let settled = settled.map(|at| at.plus_us(manners.settling_us));
        let suppressed = |n: &Arc<Notice>| n.state == crate::notice::State::Suppressed;
        let settled = settled.filter(|_| any && self.state.papers().any(suppressed));
        let settled = settled.filter(|_| line.stopped.is_none());
        shelved.into_iter().chain(settled).min()
    }
}

/// Whether a notice is sent again because nobody has acknowledged it.
pub fn is_repeat(notice: &Notice, sent: &Sent, manners: &Manners, now: Time) -> bool {
    let waits = notice.state == crate::notice::State::Unacknowledged;
    let (Some(after), Some((at, _)), true) = (manners.repeat_after_us, sent, waits) else {
        return false;
    };
    now.us_since(*at) >= after
}

/// Whether people should receive it now: another state at once; another set or priority, or another size
/// when it moved by more than half its interval, never sooner than ten seconds after the last.
pub fn wants_sending(notice: &Notice, sent: &Sent, now: Time) -> bool {
    let Some((at, last)) = sent else {
        return true;
    };
    if notice.state != last.state {
        return true;
    }
    let set = |n: &Notice| {
        let mut names: Vec<Name> = n.sources.iter().map(|s| s.source.clone()).collect();
        names.sort();
        names
    };
    let moved = notice.sources.iter().zip(&last.sources).any(|(a, b)| {
        let half = (b.high - b.low) / 2.0;
        a.source == b.source && half > 0.0 && (a.deviation - b.deviation).abs() > half
    });
    let told = |n: &Notice| n.adjustment.as_ref().map(|a| (a.stage(), a.effect));
    let other =
        set(notice) != set(last) || notice.priority != last.priority || told(notice) != told(last);
    (other || moved) && now.us_since(*at) >= SEND_EVERY_US
}

/// A notice that was raised, for the figures of how much people are told.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Raised {
    /// When.
    pub at: Time,
    /// What it was about.
    pub kind: Kind,
}

/// Raised notices remembered for the figures: far more than a day may bring.
const MOST_RAISED: usize = 500;

/// Remembers that a notice was raised.
pub fn remember(all: &mut VecDeque<Raised>, kind: Kind, at: Time) {
    if all.len() == MOST_RAISED {
        all.pop_front();
    }
    all.push_back(Raised { at, kind });
}
