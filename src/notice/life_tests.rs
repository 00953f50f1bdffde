//! The life cycle: entry by entry, by arbitrary sequences against plain facts, and as DEVELOPERS.md
//! shows it.

use std::fmt::Debug;

use proptest::prelude::*;

use super::*;

const BENEATH_STATES: [State; 4] = [
    State::Normal,
    State::Unacknowledged,
    State::Acknowledged,
    State::ReturnedUnacknowledged,
];
const ASIDES: [Aside; 4] = [
    Aside::No,
    Aside::Shelved,
    Aside::ShelvedOnce,
    Aside::OutOfService,
];
const DESIGNS: [Design; 2] = [Design::Judged, Design::HeldBack];

/// The same in facts that need no table.
#[derive(Clone, Copy, Debug)]
struct Facts {
    holds: bool,
    seen: bool,
    shelved: bool,
    once: bool,
    out: bool,
    held_back: bool,
}

impl Facts {
    fn of(life: Life) -> Self {
        Self {
            holds: life.holds(),
            seen: matches!(life.beneath, State::Acknowledged | State::Normal),
            shelved: matches!(life.aside, Aside::Shelved | Aside::ShelvedOnce),
            once: life.aside == Aside::ShelvedOnce,
            out: life.aside == Aside::OutOfService,
            held_back: life.design == Design::HeldBack,
        }
    }

    /// Set aside no longer: what holds wants to be seen again, what is gone does not.
    fn forward(self) -> Self {
        Self {
            seen: !self.holds,
            shelved: false,
            once: false,
            out: false,
            ..self
        }
    }

    fn shelve(self, once: bool) -> Self {
        let (shelved, once) = if self.out {
            (false, false)
        } else {
            (true, once)
        };
        Self {
            shelved,
            once,
            ..self
        }
    }

    fn returns(self, latched: bool) -> Self {
        let back = Self {
            holds: false,
            seen: self.seen && !(latched && self.holds),
            ..self
        };
        if self.once { back.forward() } else { back }
    }

    fn then(self, happening: Happening) -> Self {
        match happening {
            Happening::Occurs => Self {
                holds: true,
                seen: self.seen && self.holds,
                ..self
            },
            Happening::Returns => self.returns(false),
            Happening::ReturnsLatched => self.returns(true),
            Happening::Acknowledged => Self { seen: true, ..self },
            Happening::Shelved => self.shelve(false),
            Happening::ShelvedOnce => self.shelve(true),
            Happening::Unshelved if self.shelved => self.forward(),
            Happening::PutBack if self.out => self.forward(),
            Happening::TakenOut => Self {
                out: true,
                shelved: false,
                once: false,
                ..self
            },
            Happening::HeldBack => Self {
                held_back: true,
                ..self
            },
            Happening::LetGo => Self {
                held_back: false,
                ..self
            },
            Happening::ComesForward => Self {
                seen: !self.holds,
                ..self
            },
            Happening::Unshelved | Happening::PutBack => self,
        }
    }

    fn state(self) -> State {
        if self.out {
            return State::OutOfService;
        }
        if self.shelved {
            return State::Shelved;
        }
        match (self.holds, self.seen) {
            (true, _) if self.held_back => State::Suppressed,
            (true, false) => State::Unacknowledged,
            (true, true) => State::Acknowledged,
            (false, false) => State::ReturnedUnacknowledged,
            (false, true) => State::Normal,
        }
    }
}

fn every_life() -> impl Iterator<Item = Life> {
    let beneath = BENEATH_STATES.into_iter();
    beneath.flat_map(|beneath| {
        ASIDES.into_iter().flat_map(move |aside| {
            DESIGNS.into_iter().map(move |design| Life {
                beneath,
                aside,
                design,
            })
        })
    })
}

#[test]
fn every_entry_follows_from_the_facts() {
    let mut tried = 0;
    for life in every_life() {
        for happening in Happening::ALL {
            let then = life.then(happening);
            let facts = Facts::of(life).then(happening);
            assert_eq!(then.state(), facts.state(), "{life:?} {happening:?}");
            assert_eq!(then.holds(), facts.holds, "{life:?} {happening:?}");
            tried += 1;
        }
    }
    assert_eq!(tried, 4 * 4 * 2 * 12);
}

proptest! {
    #[test]
    fn any_sequence_keeps_what_must_hold(steps in prop::collection::vec(0_usize..11, 0..60)) {
        let mut life = Life::default();
        let mut facts = Facts::of(life);
        for step in steps {
            let happening = Happening::ALL[step];
            life = life.then(happening);
            facts = facts.then(happening);
            prop_assert_eq!(life.state(), facts.state());
            // Only a person sets aside, and only what is set aside is out of sight.
            let aside = matches!(life.state(), State::Shelved | State::OutOfService);
            prop_assert_eq!(aside, life.aside != Aside::No);
            prop_assert!(BENEATH_STATES.contains(&life.beneath));
        }
    }
}

fn listed_once<T: Copy + PartialEq + Debug>(table: &[(T, Happening, T)]) {
    for (i, a) in table.iter().enumerate() {
        assert_ne!(a.0, a.2, "{a:?} changes nothing");
        let later = table[i + 1..].iter();
        assert!(
            !later.clone().any(|b| (a.0, a.1) == (b.0, b.1)),
            "{a:?} twice"
        );
    }
}

#[test]
fn no_transition_is_listed_twice_or_idle() {
    listed_once(&BENEATH);
    listed_once(&ASIDE);
    listed_once(&DESIGN);
}

fn drawn<T: Copy>(
    head: &str,
    table: &[(T, Happening, T)],
    words: impl Fn(T) -> &'static str,
) -> String {
    let mut lines = vec![
        format!("| {head} | when it | then |"),
        "| --- | --- | --- |".to_owned(),
    ];
    let rows = table.iter();
    lines.extend(rows.map(|(from, happening, to)| {
        format!(
            "| {} | {} | {} |",
            words(*from),
            happening.words(),
            words(*to)
        )
    }));
    lines.join("\n")
}

#[test]
fn the_page_for_developers_shows_these_tables() {
    let page = include_str!("../../DEVELOPERS.md");
    for table in [
        drawn("condition", &BENEATH, State::words),
        drawn("set aside", &ASIDE, Aside::words),
        drawn("by design", &DESIGN, Design::words),
    ] {
        assert!(
            page.contains(&table),
            "DEVELOPERS.md lacks this:\n\n{table}"
        );
    }
}
