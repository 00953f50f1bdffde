//! Whether a condition holds: a source is silent or stuck, a clock is wrong, nothing gets in, the level is
//! below the declared quantity.
//!
//! What must hold: a condition returns on evidence (a source delivers again, moves again, comes with a
//! right time), never because the process started afresh; what stays the same is said once. What is
//! sensed here is not kept; what it comes to is, as [`super::Due`]. Deliberately absent: notices.

use std::collections::{BTreeMap, VecDeque};

use crate::model::{Name, SourceIx, Time, US_PER_S};
use crate::notice::{Detail, Kind, Manners, Trouble};

use super::bank::Watched;
use super::{level, stuck};

/// Offsets of a clock from which its median is taken.
const OFFSETS: usize = 11;

/// Offsets (or refusals in a row) that say something.
const ENOUGH: usize = 5;

/// A clock that is ahead by more than this is wrong: networks delay, and none delivers before the value
/// was taken. Common practice, no source.
const AHEAD_US: i64 = 30 * US_PER_S;

/// What a source's messages say of its clock.
#[derive(Clone, Debug, Default)]
struct Clock {
    /// Received minus taken, newest last, in microseconds.
    offsets: VecDeque<i64>,
    /// Values refused in a row for their time.
    refused: u64,
    /// Since when.
    since: Option<Time>,
}

impl Clock {
    fn median_us(&self) -> Option<i64> {
        let mut all: Vec<i64> = self.offsets.iter().copied().collect();
        all.sort_unstable();
        all.get(all.len() / 2).copied()
    }
}

/// What is sensed of a bank while the process runs.
#[derive(Clone, Debug, Default)]
pub struct Senses {
    clocks: BTreeMap<Name, Clock>,
    /// Since when a condition differs from its notice, and whether there is more of it or less.
    differs: BTreeMap<Kind, (Time, Change)>,
    /// Since when measurements can have been heard.
    listening: Option<Time>,
    pub(super) level: level::Sensed,
}

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Change {
    More,
    Less,
}

/// How measurements get in, as the plant's parts say.
#[derive(Clone, Debug, PartialEq)]
pub enum Intake {
    /// Nothing is known yet.
    Unknown,
    /// They do.
    Well,
    /// They do not.
    Trouble(Trouble),
}

impl Senses {
    /// A value came with this time and was taken in.
    pub fn timed(&mut self, source: &Name, taken: Time, now: Time) {
        let clock = self.clocks.entry(source.clone()).or_default();
        clock.refused = 0;
        clock.since = None;
        if clock.offsets.len() == OFFSETS {
            clock.offsets.pop_front();
        }
        clock.offsets.push_back(now.us_since(taken));
    }

    /// A value was refused for its time.
    pub fn refused(&mut self, source: &Name, now: Time) {
        let clock = self.clocks.entry(source.clone()).or_default();
        clock.refused += 1;
        clock.since.get_or_insert(now);
    }

    /// How long a source's values take from the machine to here: the median of the newest, in
    /// microseconds; negative where a clock is ahead.
    pub fn lag_us(&self, source: &Name) -> Option<i64> {
        self.clocks.get(source).and_then(Clock::median_us)
    }
}

impl Watched {
    /// The conditions that differ from what their notices say, for as long as they must.
    pub fn judge(
        &mut self,
        manners: &Manners,
        intake: Option<&Intake>,
        now: Time,
    ) -> Vec<(Kind, Vec<Trouble>)> {
        self.listen(intake, now);
        let mut found = vec![
            (Kind::SourceSilent, self.silent(now)),
            (Kind::SourceStuck, self.stuck()),
            (Kind::ClockWrong, self.clocks_wrong(now)),
            (Kind::LevelBelowDeclared, self.below_declared(now)),
        ];
        if let Some(intake) = intake {
            found.push((Kind::IntakeTrouble, self.intake(intake)));
        }
        found.retain(|(kind, troubles)| self.lasts(*kind, troubles, manners, now));
        found
    }

    /// What an open notice of this kind says.
    fn told(&self, kind: Kind) -> &[Trouble] {
        let mut open = self.state.conditions.iter();
        let open = open.find(|c| c.notice.kind == kind && c.notice.holds());
        open.map_or(&[], |c| &c.troubles)
    }

    fn is_told(&self, kind: Kind, source: &Name) -> bool {
        let mut told = self.told(kind).iter();
        told.any(|t| t.source.as_ref() == Some(source))
    }

    /// Whether what was found has differed from what is told for as long as it must.
    fn lasts(&mut self, kind: Kind, found: &[Trouble], manners: &Manners, now: Time) -> bool {
        let told = self.told(kind);
        let has = |all: &[Trouble], one: &Trouble| all.iter().any(|t| t.source == one.source);
        let more = found.iter().any(|t| !has(told, t));
        let less = told.iter().any(|t| !has(found, t));
        let (change, delay_us) = match (more, less) {
            (true, _) => (Change::More, manners.on_delay_us),
            (false, true) => (Change::Less, manners.off_delay_us),
            (false, false) => {
                self.senses.differs.remove(&kind);
                return false;
            }
        };
        let differs = &mut self.senses.differs;
        let since = differs.entry(kind).or_insert((now, change));
        if since.1 != change {
            *since = (now, change);
        }
        let lasts = now.us_since(since.0) >= delay_us;
        if lasts {
            differs.remove(&kind);
        }
        lasts
    }

    /// While the broker is lost nobody is heard, and whoever then counts as silent may only not have
    /// been heard.
    fn listen(&mut self, intake: Option<&Intake>, now: Time) {
        match intake {
            Some(Intake::Trouble(_)) => self.senses.listening = None,
            _ => {
                self.senses.listening.get_or_insert(now);
            }
        }
    }

    /// Loses what was heard: the broker is away.
    pub fn lose_hearing(&mut self) {
        self.senses.listening = None;
    }

    fn silent(&self, now: Time) -> Vec<Trouble> {
        let line = &self.state.line;
        let Some(began) = self.state.began else {
            return Vec::new();
        };
        let heard_from = self.senses.listening.unwrap_or(now);
        let began = line.started.unwrap_or(began).max(began);
        let one = |(s, source): (usize, &super::source::Source)| {
            let judged = source.silent && !source.retired && !source.out_of_use;
            let ring = self.state.windows.ring(SourceIx(s as u16));
            let is_new = || {
                let since = source.silent_from(&self.bank, ring, began.max(heard_from));
                line.stopped.is_none() && since <= now
            };
            let holds = judged && (self.is_told(Kind::SourceSilent, &source.name) || is_new());
            holds.then(|| Trouble {
                source: Some(source.name.clone()),
                since: source.last_received.unwrap_or(began),
                detail: Detail::Silent,
            })
        };
        let sources = self.state.sources.iter().enumerate();
        sources.filter_map(one).collect()
    }

    fn stuck(&self) -> Vec<Trouble> {
        let origin = self.state.windows.origin().to_f64();
        let all = self.runs().into_iter();
        let one = |run: stuck::Run| {
            let name = self.name(run.source);
            let holds = run.is_beyond_chance
                || (run.times >= stuck::STILL && self.is_told(Kind::SourceStuck, &name));
            holds.then_some(Trouble {
                source: Some(name),
                since: run.since,
                detail: Detail::Stuck {
                    value: run.offset + origin,
                    times: run.times as u64,
                },
            })
        };
        all.filter_map(one).collect()
    }

    /// Sources that repeat one value beyond chance now: nothing else is to be said of them.
    pub fn stuck_now(&self) -> Vec<SourceIx> {
        let all = self.runs().into_iter();
        all.filter(|r| r.is_beyond_chance)
            .map(|r| r.source)
            .collect()
    }

    fn runs(&self) -> Vec<stuck::Run> {
        let sources = self.state.sources.iter().enumerate();
        let delivers = sources.filter(|(_, s)| s.takes_part() && !s.silent);
        let who: Vec<SourceIx> = delivers.map(|(s, _)| SourceIx(s as u16)).collect();
        stuck::runs(&self.state.windows, &who)
    }

    fn clocks_wrong(&self, now: Time) -> Vec<Trouble> {
        let one = |source: &super::source::Source| {
            if source.retired || source.out_of_use {
                return None;
            }
            let clock = self.senses.clocks.get(&source.name);
            let told = self.is_told(Kind::ClockWrong, &source.name);
            let Some(clock) = clock else {
                // Nothing has been heard of it since the start: no evidence that it is right.
                let again = || self.told(Kind::ClockWrong).iter();
                return again()
                    .find(|t| t.source.as_ref() == Some(&source.name) && told)
                    .cloned();
            };
            let detail = if clock.refused as usize >= ENOUGH {
                Detail::Refused {
                    times: clock.refused,
                }
            } else {
                let median = clock
                    .median_us()
                    .filter(|_| clock.offsets.len() >= ENOUGH)?;
                (median < -AHEAD_US).then_some(Detail::Ahead { by_us: -median })?
            };
            Some(Trouble {
                source: Some(source.name.clone()),
                since: clock.since.unwrap_or(now),
                detail,
            })
        };
        self.state.sources.iter().filter_map(one).collect()
    }

    fn intake(&self, intake: &Intake) -> Vec<Trouble> {
        match intake {
            Intake::Unknown => self.told(Kind::IntakeTrouble).to_vec(),
            Intake::Well => Vec::new(),
            Intake::Trouble(trouble) => vec![trouble.clone()],
        }
    }

    /// Looks at the level; a notice that stands is kept until there is evidence.
    fn below_declared(&mut self, now: Time) -> Vec<Trouble> {
        let told = self.told(Kind::LevelBelowDeclared).to_vec();
        let Some(declared) = self.bank.characteristic.declared else {
            return Vec::new();
        };
        let stands = !told.is_empty();
        match self.level(declared.to_f64(), stands) {
            level::Level::Below { mean, upper } => vec![Trouble {
                source: None,
                since: told.first().map_or(now, |t| t.since),
                detail: Detail::Below { mean, upper },
            }],
            level::Level::Unsure => told,
            level::Level::Back => Vec::new(),
        }
    }
}
