//! How much one address may ask: enough for a wall of screens, too little to guess tokens or to keep
//! us busy.
//!
//! Owns a small table of addresses. What must hold: the table is bounded; whoever waits is let in
//! again. Deliberately absent: any list of the wanted or unwanted.

use std::collections::BTreeMap;
use std::net::IpAddr;
use std::sync::{Mutex, PoisonError};

use crate::model::{Time, US_PER_S};

/// Requests of one address in the long run, per second: two hundred viewers behind one proxy who each
/// load a page every two seconds.
const REQUESTS_PER_S: f64 = 200.0;
/// Requests at once.
const BURST: f64 = 2000.0;
/// Wrong tokens of one address in the long run, per second: ten a minute.
const WRONG_PER_S: f64 = 10.0 / 60.0;
/// Wrong tokens at once.
const WRONG_BURST: f64 = 10.0;
/// More addresses than a plant's network has; the table starts afresh then.
const MOST_ADDRESSES: usize = 4096;

/// What is being asked for.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub enum Asked {
    /// Any request.
    Request,
    /// Another chance after a wrong token.
    WrongToken,
}

impl Asked {
    fn rate(self) -> (f64, f64) {
        match self {
            Self::Request => (REQUESTS_PER_S, BURST),
            Self::WrongToken => (WRONG_PER_S, WRONG_BURST),
        }
    }
}

/// What is left of an allowance, and when that was.
#[derive(Clone, Copy, Debug)]
struct Left {
    left: f64,
    at: Time,
}

/// The table.
#[derive(Default)]
pub struct Limits {
    table: Mutex<BTreeMap<(IpAddr, Asked), Left>>,
}

impl Limits {
    /// Takes one from an address's allowance; how many seconds to wait when nothing is left.
    ///
    /// # Errors
    /// The seconds, 1 or more.
    pub fn take(&self, from: IpAddr, asked: Asked, now: Time) -> Result<(), u64> {
        self.with(from, asked, now, |left, rate| {
            if left.left < 1.0 {
                return Err(((1.0 - left.left) / rate).ceil().max(1.0) as u64);
            }
            left.left -= 1.0;
            Ok(())
        })
    }

    /// Whether anything is left, without taking it.
    ///
    /// # Errors
    /// The seconds to wait, 1 or more.
    pub fn check(&self, from: IpAddr, asked: Asked, now: Time) -> Result<(), u64> {
        self.with(from, asked, now, |left, rate| {
            if left.left < 1.0 {
                return Err(((1.0 - left.left) / rate).ceil().max(1.0) as u64);
            }
            Ok(())
        })
    }

    fn with<T>(
        &self,
        from: IpAddr,
        asked: Asked,
        now: Time,
        then: impl FnOnce(&mut Left, f64) -> T,
    ) -> T {
        let (rate, burst) = asked.rate();
        // Every change is one step on plain data, so a poisoned table is still a whole one.
        let mut table = self.table.lock().unwrap_or_else(PoisonError::into_inner);
        if table.len() >= MOST_ADDRESSES && !table.contains_key(&(from, asked)) {
            table.clear();
        }
        let left = table.entry((from, asked)).or_insert(Left {
            left: burst,
            at: now,
        });
        let passed_s = now.us_since(left.at).max(0) as f64 / US_PER_S as f64;
        left.left = (left.left + passed_s * rate).min(burst);
        left.at = now;
        then(left, rate)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_allowance_is_used_up_and_comes_back() {
        let limits = Limits::default();
        let (a, b) = (IpAddr::from([192, 0, 2, 1]), IpAddr::from([192, 0, 2, 2]));
        let at = |s: i64| Time::from_us(s * US_PER_S);
        for _ in 0..10 {
            assert_eq!(limits.check(a, Asked::WrongToken, at(0)), Ok(()));
            assert_eq!(limits.take(a, Asked::WrongToken, at(0)), Ok(()));
        }
        assert_eq!(limits.take(a, Asked::WrongToken, at(0)), Err(6));
        assert_eq!(limits.check(a, Asked::WrongToken, at(3)), Err(3));
        assert_eq!(limits.take(b, Asked::WrongToken, at(0)), Ok(()));
        assert_eq!(limits.take(a, Asked::Request, at(0)), Ok(()));
        assert_eq!(limits.take(a, Asked::WrongToken, at(6)), Ok(()));
        assert_eq!(limits.take(a, Asked::WrongToken, at(6)), Err(6));
    }

    #[test]
    fn the_table_is_bounded() {
        let limits = Limits::default();
        for n in 0..10_000_u32 {
            let from = IpAddr::from(n.to_be_bytes());
            assert_eq!(limits.take(from, Asked::Request, Time::from_us(0)), Ok(()));
        }
        assert!(limits.table.lock().expect("whole").len() <= MOST_ADDRESSES);
    }
}
