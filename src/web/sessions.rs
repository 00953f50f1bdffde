//! Sign-in sessions, in memory.
//!
//! Owns session ids, their rights and their one-time fields. What must hold: at most [`MOST`]
//! sessions, each ends [`LASTS_US`] after its last use; ids and fields are 32 random bytes; a field
//! is good for one change. Deliberately absent: persistence (a restart signs everybody out) and
//! cookies' text (that is `signin`).

use std::collections::VecDeque;
use std::sync::{Mutex, MutexGuard, PoisonError};

use subtle::ConstantTimeEq;

use crate::model::{Time, US_PER_S};

use super::tokens::Rights;

/// More people than a plant has at once; the oldest gives way, so memory is bounded.
const MOST: usize = 256;
/// Twelve hours: longer than a shift, so that nobody must sign in twice in one.
pub const LASTS_US: i64 = 12 * 3600 * US_PER_S;

/// Why no session could be made.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
#[error("the system gives no random bytes: {0}")]
pub struct RandomError(String);

/// What became of a form's one-time field.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Field {
    /// It was good and is now used.
    Fresh,
    /// It is the one that was used last: the same form was sent twice.
    Repeated,
    /// It is neither.
    Wrong,
}

struct Session {
    id: String,
    rights: Rights,
    used: Time,
    field: String,
    last_field: Option<String>,
}

/// All sessions.
#[derive(Default)]
pub struct Sessions {
    list: Mutex<VecDeque<Session>>,
}

/// 32 random bytes as hexadecimal text.
///
/// # Errors
/// When the system gives none.
pub fn random_text() -> Result<String, RandomError> {
    let mut bytes = [0_u8; 32];
    getrandom::fill(&mut bytes).map_err(|e| RandomError(e.to_string()))?;
    Ok(bytes.iter().map(|b| format!("{b:02x}")).collect())
}

/// Compares two texts in a time that depends on their lengths alone.
pub fn same(a: &str, b: &str) -> bool {
    a.as_bytes().ct_eq(b.as_bytes()).into()
}

impl Sessions {
    /// Starts a session and gives its id.
    ///
    /// # Errors
    /// When the system gives no random bytes.
    pub fn start(&self, rights: Rights, now: Time) -> Result<String, RandomError> {
        let id = random_text()?;
        let session = Session {
            id: id.clone(),
            rights,
            used: now,
            field: random_text()?,
            last_field: None,
        };
        let mut list = self.live(now);
        if list.len() >= MOST {
            list.pop_front();
        }
        list.push_back(session);
        Ok(id)
    }

    /// The rights of a session and the field for its next form; marks it used.
    pub fn find(&self, id: &str, now: Time) -> Option<(Rights, String)> {
        let mut list = self.live(now);
        let session = list.iter_mut().find(|s| same(&s.id, id))?;
        session.used = now;
        Some((session.rights, session.field.clone()))
    }

    /// Uses a form's field up.
    pub fn spend(&self, id: &str, field: &str, now: Time) -> Field {
        let mut list = self.live(now);
        let Some(session) = list.iter_mut().find(|s| same(&s.id, id)) else {
            return Field::Wrong;
        };
        if session
            .last_field
            .as_deref()
            .is_some_and(|l| same(l, field))
        {
            return Field::Repeated;
        }
        // Without random bytes there is no next field, so this one is not given up.
        match random_text() {
            Ok(next) if same(&session.field, field) => {
                session.last_field = Some(std::mem::replace(&mut session.field, next));
                Field::Fresh
            }
            _ => Field::Wrong,
        }
    }

    /// Ends a session.
    pub fn end(&self, id: &str, now: Time) {
        self.live(now).retain(|s| !same(&s.id, id));
    }

    fn live(&self, now: Time) -> MutexGuard<'_, VecDeque<Session>> {
        // Every change below is one step on plain data, so a poisoned list is still a whole one.
        let mut list = self.list.lock().unwrap_or_else(PoisonError::into_inner);
        list.retain(|s| now.us_since(s.used) < LASTS_US);
        list
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const BOTH: Rights = Rights {
        look: true,
        act: true,
    };

    #[test]
    fn a_session_lasts_from_its_last_use() {
        let sessions = Sessions::default();
        let at = |us| Time::from_us(us);
        let id = sessions.start(BOTH, at(0)).expect("random");
        assert!(sessions.find(&id, at(LASTS_US - 1)).is_some());
        assert!(sessions.find(&id, at(2 * LASTS_US - 2)).is_some());
        assert!(sessions.find(&id, at(3 * LASTS_US)).is_none());
        assert!(sessions.find("", at(0)).is_none());
    }

    #[test]
    fn a_field_is_good_once() {
        let sessions = Sessions::default();
        let now = Time::from_us(0);
        let id = sessions.start(BOTH, now).expect("random");
        let (_, field) = sessions.find(&id, now).expect("known");
        assert_eq!(sessions.spend(&id, "made up", now), Field::Wrong);
        assert_eq!(sessions.spend(&id, &field, now), Field::Fresh);
        assert_eq!(sessions.spend(&id, &field, now), Field::Repeated);
        let (_, next) = sessions.find(&id, now).expect("known");
        assert_ne!(next, field);
        assert_eq!(sessions.spend(&id, &next, now), Field::Fresh);
        assert_eq!(sessions.spend(&id, &field, now), Field::Wrong);
        assert_eq!(sessions.spend("other", &next, now), Field::Wrong);
    }

    #[test]
    fn the_oldest_gives_way() {
        let sessions = Sessions::default();
        let now = Time::from_us(0);
        let first = sessions.start(BOTH, now).expect("random");
        for _ in 0..MOST {
            sessions.start(BOTH, now).expect("random");
        }
        assert!(sessions.find(&first, now).is_none());
        sessions.end(&first, now);
        assert_eq!(sessions.live(now).len(), MOST);
    }
}
