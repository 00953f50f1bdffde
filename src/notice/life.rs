//! The life cycle of a notice: which state follows which, as data.
//!
//! States and transitions of IEC 62682 / ISA-18.2, as OPC 10000-9 describes them openly: a condition
//! occurs and returns, a person acknowledges, and neither hides the other.

use super::State;

/// What can happen to a notice.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Happening {
    /// The condition holds.
    Occurs,
    /// There is evidence that the condition is gone.
    Returns,
    /// A person acknowledges.
    Acknowledged,
}

/// Every transition; whatever is not listed changes nothing.
pub const TRANSITIONS: [(State, Happening, State); 6] = [
    (State::Normal, Happening::Occurs, State::Unacknowledged),
    (
        State::Unacknowledged,
        Happening::Acknowledged,
        State::Acknowledged,
    ),
    (
        State::Unacknowledged,
        Happening::Returns,
        State::ReturnedUnacknowledged,
    ),
    (State::Acknowledged, Happening::Returns, State::Normal),
    (
        State::ReturnedUnacknowledged,
        Happening::Acknowledged,
        State::Normal,
    ),
    (
        State::ReturnedUnacknowledged,
        Happening::Occurs,
        State::Unacknowledged,
    ),
];

/// The state after something happened.
pub fn after(state: State, happening: Happening) -> State {
    let listed = TRANSITIONS
        .iter()
        .find(|t| t.0 == state && t.1 == happening);
    listed.map_or(state, |t| t.2)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    const HAPPENINGS: [Happening; 3] = [
        Happening::Occurs,
        Happening::Returns,
        Happening::Acknowledged,
    ];

    /// A model told in two facts, from which the four states follow.
    #[derive(Clone, Copy)]
    struct Facts {
        holds: bool,
        seen: bool,
    }

    impl Facts {
        fn state(self) -> State {
            match (self.holds, self.seen) {
                (true, false) => State::Unacknowledged,
                (true, true) => State::Acknowledged,
                (false, false) => State::ReturnedUnacknowledged,
                (false, true) => State::Normal,
            }
        }

        fn then(self, happening: Happening) -> Self {
            match happening {
                // A condition that occurs again wants to be seen again, unless it never went away.
                Happening::Occurs => Self {
                    holds: true,
                    seen: self.seen && self.holds,
                },
                Happening::Returns => Self {
                    holds: false,
                    ..self
                },
                Happening::Acknowledged => Self { seen: true, ..self },
            }
        }
    }

    proptest! {
        #[test]
        fn the_table_follows_from_two_facts(steps in prop::collection::vec(0_usize..3, 0..40)) {
            let mut facts = Facts { holds: false, seen: true };
            let mut state = State::Normal;
            for step in steps {
                facts = facts.then(HAPPENINGS[step]);
                state = after(state, HAPPENINGS[step]);
                prop_assert_eq!(state, facts.state());
            }
        }
    }

    #[test]
    fn no_transition_is_listed_twice_or_idle() {
        for (i, a) in TRANSITIONS.iter().enumerate() {
            assert_ne!(a.0, a.2, "{a:?} changes nothing");
            assert!(
                TRANSITIONS[i + 1..]
                    .iter()
                    .all(|b| (a.0, a.1) != (b.0, b.1)),
                "{a:?} twice"
            );
        }
    }
}
