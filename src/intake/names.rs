//! One shared copy of each name, so that a million measurements of sixty sources hold sixty names.
//!
//! What must hold: memory stays bounded when somebody publishes ever new names; beyond the bound a
//! name simply gets a copy of its own.

use std::collections::HashSet;

use crate::model::Name;

/// How many names are shared: far more than a plant has sources, far less than a flood brings.
const MOST_NAMES: usize = 4096;

/// The names known so far.
#[derive(Debug, Default)]
pub struct Names(HashSet<Name>);

impl Names {
    /// The shared copy of this name.
    pub fn shared(&mut self, name: &str) -> Name {
        if let Some(known) = self.0.get(name) {
            return known.clone();
        }
        let new: Name = name.into();
        if self.0.len() < MOST_NAMES {
            self.0.insert(new.clone());
        }
        new
    }
}

#[cfg(test)]
mod tests {
    use std::sync::Arc;

    use super::*;

    #[test]
    fn names_are_shared_until_the_bound() {
        let mut names = Names::default();
        assert!(Arc::ptr_eq(&names.shared("07"), &names.shared("07")));
        for n in 0..2 * MOST_NAMES {
            assert_eq!(names.shared(&n.to_string()).as_ref(), n.to_string());
        }
        assert_eq!(names.0.len(), MOST_NAMES);
        assert!(Arc::ptr_eq(&names.shared("07"), &names.shared("07")));
    }
}
