//! What people do with a notice, and what is remembered of it.
//!
//! Owns the rules by which a deed is allowed, and the notice's record of who did what when. What must
//! hold: nothing is done without a name; nobody shelves for longer than the plant allows; an outcome may
//! be corrected, and the record shows both. Deliberately absent: clocks, and counting outcomes against
//! the call budget (that is `engine`).

use serde::{Deserialize, Serialize};

use crate::model::{Name, Time, US_PER_S};

use super::{Acknowledgement, Aside, Happening, Life, Notice, State};

/// Entries kept with a notice: more than a shift of people can write. The oldest go.
const MOST_ENTRIES: usize = 100;

/// The plant's manners with notices.
#[derive(Clone, Debug, PartialEq)]
pub struct Manners {
    /// Nobody shelves for longer.
    pub longest_shelving_us: i64,
    /// Whether a return wants to be acknowledged even where the notice was.
    pub latching: Latching,
    /// A notice that stands unacknowledged for this long is sent again; `None` means never.
    pub repeat_after_us: Option<i64>,
    /// A condition must hold for this long before its notice is raised.
    pub on_delay_us: i64,
    /// It must be gone for this long before its notice returns.
    pub off_delay_us: i64,
    /// How long a line settles after a start or a changeover, in which its notices are suppressed.
    pub settling_us: i64,
}

impl Default for Manners {
    /// Common practice, without a source: a shift, no latching, no repeats, half a minute.
    fn default() -> Self {
        Self {
            longest_shelving_us: 8 * 3600 * US_PER_S,
            latching: Latching::Off,
            repeat_after_us: None,
            on_delay_us: 30 * US_PER_S,
            off_delay_us: 30 * US_PER_S,
            settling_us: 0,
        }
    }
}

impl Manners {
    /// How a return is told.
    pub const fn returns(&self) -> Happening {
        match self.latching {
            Latching::On => Happening::ReturnsLatched,
            Latching::Off => Happening::Returns,
        }
    }
}

/// Whether a return wants to be acknowledged in any case.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Latching {
    /// It does.
    On,
    /// Only where nobody has acknowledged the notice.
    Off,
}

/// What came of a call, as a person says.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum CallOutcome {
    /// A fault was found and corrected.
    FoundAndCorrected,
    /// It is real and was left as it is.
    RealButLeft,
    /// Nothing was found: this counts against the call budget.
    NothingFound,
    /// The instrument or the data were at fault.
    InstrumentOrData,
}

impl CallOutcome {
    /// Every one.
    pub const ALL: [Self; 4] = [
        Self::FoundAndCorrected,
        Self::RealButLeft,
        Self::NothingFound,
        Self::InstrumentOrData,
    ];

    /// The word in interfaces.
    pub const fn word(self) -> &'static str {
        match self {
            Self::FoundAndCorrected => "found_and_corrected",
            Self::RealButLeft => "real_but_left",
            Self::NothingFound => "nothing_found",
            Self::InstrumentOrData => "instrument_or_data",
        }
    }

    /// The words people read.
    pub const fn words(self) -> &'static str {
        match self {
            Self::FoundAndCorrected => "found and corrected",
            Self::RealButLeft => "real, but left",
            Self::NothingFound => "nothing found",
            Self::InstrumentOrData => "instrument or data at fault",
        }
    }

    /// The outcome of this word.
    pub fn of(word: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|o| o.word() == word)
    }
}

/// How long a shelving may last at most.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Shelving {
    /// For its time.
    Timed,
    /// For its time, and no longer than until the condition returns.
    Once,
}

/// What a person does with a notice.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Deed {
    /// Acknowledges, perhaps with what came of it.
    Acknowledge(Option<CallOutcome>),
    /// Sets it aside for so many microseconds.
    Shelve(i64, Shelving),
    /// Takes it back from there.
    Unshelve,
    /// Takes it out of service.
    TakeOut,
    /// Puts it back in service.
    PutBack,
    /// Writes something, perhaps what came of it: this closes the matter.
    Comment(Option<CallOutcome>),
}

/// What an entry of the record says.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Act {
    /// Acknowledged.
    Acknowledged,
    /// Shelved until then.
    Shelved(Time, Shelving),
    /// Unshelved by a person.
    Unshelved,
    /// The shelving's time was over.
    ShelvingOver,
    /// Taken out of service.
    TakenOut,
    /// Put back in service.
    PutBack,
    /// Said what came of it.
    Told(CallOutcome),
    /// Written.
    Commented,
}

impl Act {
    /// The word in interfaces.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Acknowledged => "acknowledged",
            Self::Shelved(..) => "shelved",
            Self::Unshelved => "unshelved",
            Self::ShelvingOver => "shelving_over",
            Self::TakenOut => "out_of_service",
            Self::PutBack => "in_service",
            Self::Told(_) => "outcome",
            Self::Commented => "comment",
        }
    }
}

/// One entry of a notice's record.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Entry {
    /// The person; `evenrow` for what happened by itself.
    pub by: Name,
    /// When.
    pub at: Time,
    /// What was done.
    pub act: Act,
    /// What the person wrote; may be empty.
    pub comment: String,
}

/// How a notice is being handled.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Handling {
    /// The facts from which its state follows.
    pub life: Life,
    /// Until when it is shelved.
    pub shelved_until: Option<Time>,
    /// What came of it.
    pub outcome: Option<CallOutcome>,
    /// Who did what, oldest first.
    pub entries: Vec<Entry>,
}

/// Who does something, when, and what they write.
#[derive(Clone, Debug, PartialEq)]
pub struct Said {
    /// The person.
    pub by: Name,
    /// When.
    pub at: Time,
    /// May be empty.
    pub comment: String,
}

impl Notice {
    /// Whether the condition holds, whoever has set the notice aside.
    pub const fn holds(&self) -> bool {
        self.handling.life.holds()
    }

    /// Lets something happen; says whether it changed anything.
    pub fn happen(&mut self, happening: Happening, now: Time) -> bool {
        let before = self.handling.life;
        let life = before.then(happening);
        if life == before {
            return false;
        }
        self.handling.life = life;
        self.state = life.state();
        self.changed = now;
        if life.holds() != before.holds() {
            self.returned = (!life.holds()).then_some(now);
        }
        if !matches!(life.aside, Aside::Shelved | Aside::ShelvedOnce) {
            self.handling.shelved_until = None;
        }
        true
    }

    /// Does what a person asks; says whether it changed anything. Asking twice gives the same.
    ///
    /// # Errors
    /// Why it cannot be done, for that person.
    pub fn act(&mut self, deed: Deed, said: Said, manners: &Manners) -> Result<bool, String> {
        match deed {
            Deed::Acknowledge(outcome) => Ok(self.acknowledge(outcome, said)),
            Deed::Shelve(for_us, how) => self.shelve(for_us, how, said, manners),
            Deed::Unshelve => Ok(self.step(Happening::Unshelved, Act::Unshelved, said)),
            Deed::TakeOut => Ok(self.step(Happening::TakenOut, Act::TakenOut, said)),
            Deed::PutBack => Ok(self.step(Happening::PutBack, Act::PutBack, said)),
            Deed::Comment(outcome) => self.comment(outcome, said),
        }
    }

    fn acknowledge(&mut self, outcome: Option<CallOutcome>, said: Said) -> bool {
        let (by, at) = (said.by.clone(), said.at);
        let comment = said.comment.clone();
        let seen = self.step(Happening::Acknowledged, Act::Acknowledged, said);
        if seen {
            self.acknowledged = Some(Acknowledgement {
                by: by.clone(),
                at,
                comment,
            });
        }
        let comment = String::new();
        let told = outcome.is_some_and(|o| self.tell_outcome(o, Said { by, at, comment }));
        seen || told
    }

    fn shelve(
        &mut self,
        for_us: i64,
        how: Shelving,
        said: Said,
        manners: &Manners,
    ) -> Result<bool, String> {
        let longest = manners.longest_shelving_us;
        if !(1..=longest).contains(&for_us) {
            let minutes = longest / (60 * US_PER_S);
            return Err(format!(
                "a notice is shelved for at least a minute and at most {minutes} minutes here \
                 (`longest_shelving`)"
            ));
        }
        match self.state {
            State::OutOfService => {
                return Err("it is out of service; put it back in service first".to_owned());
            }
            State::Normal => return Err("it is over; there is nothing to shelve".to_owned()),
            _ => {}
        }
        let until = said.at.plus_us(for_us);
        let happening = match how {
            Shelving::Timed => Happening::Shelved,
            Shelving::Once => Happening::ShelvedOnce,
        };
        let at = said.at;
        self.happen(happening, at);
        let news = self.handling.shelved_until != Some(until);
        self.handling.shelved_until = Some(until);
        self.changed = at;
        self.note(Act::Shelved(until, how), said);
        Ok(news)
    }

    fn comment(&mut self, outcome: Option<CallOutcome>, said: Said) -> Result<bool, String> {
        match outcome {
            Some(outcome) => Ok(self.tell_outcome(outcome, said)),
            None if said.comment.is_empty() => Err("a comment needs words".to_owned()),
            None => {
                self.changed = said.at;
                self.note(Act::Commented, said);
                Ok(true)
            }
        }
    }

    fn tell_outcome(&mut self, outcome: CallOutcome, said: Said) -> bool {
        if self.handling.outcome == Some(outcome) && said.comment.is_empty() {
            return false;
        }
        self.handling.outcome = Some(outcome);
        self.changed = said.at;
        self.note(Act::Told(outcome), said);
        true
    }

    fn step(&mut self, happening: Happening, act: Act, said: Said) -> bool {
        let changed = self.happen(happening, said.at);
        if changed {
            self.note(act, said);
        }
        changed
    }

    /// The shelving is over by itself when its time has come; says whether it was.
    pub fn end_shelving(&mut self, now: Time) -> bool {
        if self.handling.shelved_until.is_none_or(|until| until > now) {
            return false;
        }
        let said = Said {
            by: "evenrow".into(),
            at: now,
            comment: String::new(),
        };
        self.step(Happening::Unshelved, Act::ShelvingOver, said)
    }

    fn note(&mut self, act: Act, said: Said) {
        let Said { by, at, comment } = said;
        let entries = &mut self.handling.entries;
        if entries.len() == MOST_ENTRIES {
            entries.remove(0);
        }
        entries.push(Entry {
            by,
            at,
            act,
            comment,
        });
    }
}

#[cfg(test)]
#[path = "handling_tests.rs"]
mod tests;
