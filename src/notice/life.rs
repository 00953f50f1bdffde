//! The life cycle of a notice: which state follows which, as data.
//!
//! States and terms of IEC 62682 / ISA-18.2, as OPC 10000-9 describes them openly. Three facts run side
//! by side, so that a notice that is set aside keeps evaluating: what the condition does and whether a
//! person has seen it ([`BENEATH`]), whether a person has set it aside ([`ASIDE`]), and whether the line
//! holds it back by design ([`DESIGN`]). The state that people see is made from the three
//! ([`Life::state`]). DEVELOPERS.md shows these tables; a test draws them and compares.
//! Deliberately absent: times. Who shelves for how long is [`super::Handling`]'s business.

use serde::{Deserialize, Serialize};

use super::State;

/// What can happen to a notice.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Happening {
    /// The condition holds.
    Occurs,
    /// There is evidence that the condition is gone.
    Returns,
    /// The same, where a return wants to be seen in any case (`latching`).
    ReturnsLatched,
    /// A person acknowledges.
    Acknowledged,
    /// A person sets it aside for a time.
    Shelved,
    /// The same, until it returns at the latest.
    ShelvedOnce,
    /// The time is over, or a person takes it back.
    Unshelved,
    /// A person takes it out of service.
    TakenOut,
    /// A person puts it back in service.
    PutBack,
    /// The line stands or settles after a changeover.
    HeldBack,
    /// The line runs and has settled.
    LetGo,
    /// It is no longer set aside; follows from the others and never comes from outside.
    ComesForward,
}

impl Happening {
    /// Every one.
    pub const ALL: [Self; 12] = [
        Self::Occurs,
        Self::Returns,
        Self::ReturnsLatched,
        Self::Acknowledged,
        Self::Shelved,
        Self::ShelvedOnce,
        Self::Unshelved,
        Self::TakenOut,
        Self::PutBack,
        Self::HeldBack,
        Self::LetGo,
        Self::ComesForward,
    ];

    /// The words for people.
    pub const fn words(self) -> &'static str {
        match self {
            Self::Occurs => "occurs",
            Self::Returns => "returns",
            Self::ReturnsLatched => "returns, latching",
            Self::Acknowledged => "is acknowledged",
            Self::Shelved => "is shelved",
            Self::ShelvedOnce => "is shelved once",
            Self::Unshelved => "is unshelved, or its time is over",
            Self::TakenOut => "is taken out of service",
            Self::PutBack => "is put back in service",
            Self::HeldBack => "is held back",
            Self::LetGo => "is let go",
            Self::ComesForward => "comes forward",
        }
    }
}

/// Whether a person has set a notice aside.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Aside {
    /// Nobody has.
    #[default]
    No,
    /// For a time.
    Shelved,
    /// For a time, and no longer than until it returns.
    ShelvedOnce,
    /// Until somebody puts it back.
    OutOfService,
}

impl Aside {
    /// The words for people.
    pub const fn words(self) -> &'static str {
        match self {
            Self::No => "in force",
            Self::Shelved => "shelved",
            Self::ShelvedOnce => "shelved once",
            Self::OutOfService => "out of service",
        }
    }
}

/// Whether the line holds a notice back.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Design {
    /// The line runs and has settled.
    #[default]
    Judged,
    /// It stands, or settles after a changeover.
    HeldBack,
}

impl Design {
    /// The words for people.
    pub const fn words(self) -> &'static str {
        match self {
            Self::Judged => "judged",
            Self::HeldBack => "held back",
        }
    }
}

/// What the condition does, and whether a person has seen it. Whatever is not listed changes nothing,
/// here and in the other tables.
pub const BENEATH: [(State, Happening, State); 10] = {
    use Happening::{Acknowledged as Seen, ComesForward, Occurs, Returns, ReturnsLatched};
    use State::{Acknowledged, Normal, ReturnedUnacknowledged, Unacknowledged};
    [
        (Normal, Occurs, Unacknowledged),
        (Unacknowledged, Seen, Acknowledged),
        (Unacknowledged, Returns, ReturnedUnacknowledged),
        (Unacknowledged, ReturnsLatched, ReturnedUnacknowledged),
        (Acknowledged, Returns, Normal),
        (Acknowledged, ReturnsLatched, ReturnedUnacknowledged),
        // Whoever set it aside asked to be told again.
        (Acknowledged, ComesForward, Unacknowledged),
        (ReturnedUnacknowledged, Seen, Normal),
        (ReturnedUnacknowledged, Occurs, Unacknowledged),
        // Whoever set it aside had seen it, and nothing is left to do.
        (ReturnedUnacknowledged, ComesForward, Normal),
    ]
};

/// Whether a person has set it aside. Where the last column is "in force", it comes forward.
pub const ASIDE: [(Aside, Happening, Aside); 12] = {
    use Aside::{No, OutOfService, Shelved, ShelvedOnce};
    use Happening as H;
    [
        (No, H::Shelved, Shelved),
        (No, H::ShelvedOnce, ShelvedOnce),
        (No, H::TakenOut, OutOfService),
        (Shelved, H::ShelvedOnce, ShelvedOnce),
        (Shelved, H::Unshelved, No),
        (Shelved, H::TakenOut, OutOfService),
        (ShelvedOnce, H::Shelved, Shelved),
        (ShelvedOnce, H::Unshelved, No),
        (ShelvedOnce, H::Returns, No),
        (ShelvedOnce, H::ReturnsLatched, No),
        (ShelvedOnce, H::TakenOut, OutOfService),
        (OutOfService, H::PutBack, No),
    ]
};

/// Whether the line holds it back.
pub const DESIGN: [(Design, Happening, Design); 2] = [
    (Design::Judged, Happening::HeldBack, Design::HeldBack),
    (Design::HeldBack, Happening::LetGo, Design::Judged),
];

fn after<T: Copy + PartialEq>(table: &[(T, Happening, T)], from: T, happening: Happening) -> T {
    let listed = table.iter().find(|t| t.0 == from && t.1 == happening);
    listed.map_or(from, |t| t.2)
}

/// The three facts of a notice.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Life {
    /// One of the four states of [`BENEATH`].
    pub beneath: State,
    /// Whether a person has set it aside.
    pub aside: Aside,
    /// Whether the line holds it back.
    pub design: Design,
}

impl Default for Life {
    fn default() -> Self {
        Self {
            beneath: State::Normal,
            aside: Aside::No,
            design: Design::Judged,
        }
    }
}

impl Life {
    /// The life after something happened.
    #[must_use]
    pub fn then(self, happening: Happening) -> Self {
        let aside = after(&ASIDE, self.aside, happening);
        let mut beneath = after(&BENEATH, self.beneath, happening);
        if aside != self.aside && aside == Aside::No {
            beneath = after(&BENEATH, beneath, Happening::ComesForward);
        }
        Self {
            beneath,
            aside,
            design: after(&DESIGN, self.design, happening),
        }
    }

    /// Whether the condition holds, whoever has set the notice aside.
    pub const fn holds(self) -> bool {
        matches!(self.beneath, State::Unacknowledged | State::Acknowledged)
    }

    /// The state that people see: what a person decided goes before what the line decides, and what the
    /// line holds back is a condition that holds.
    pub const fn state(self) -> State {
        match (self.aside, self.design) {
            (Aside::OutOfService, _) => State::OutOfService,
            (Aside::Shelved | Aside::ShelvedOnce, _) => State::Shelved,
            (Aside::No, Design::HeldBack) if self.holds() => State::Suppressed,
            (Aside::No, _) => self.beneath,
        }
    }
}

#[cfg(test)]
#[path = "life_tests.rs"]
mod tests;
