//! The only reader of clocks.

use std::sync::Arc;
use std::sync::atomic::{AtomicI64, Ordering};
use std::time::{Duration, SystemTime, UNIX_EPOCH};

use tokio::time::Instant;

use crate::model::Time;

/// Tells the time: the system's, or one that a test moves by hand.
#[derive(Clone, Debug)]
pub enum Clock {
    /// The machine's clock.
    System,
    /// A time that stands until it is set.
    Manual(Arc<AtomicI64>),
}

impl Clock {
    /// A clock that stands at `at`.
    pub fn manual(at: Time) -> Self {
        Self::Manual(Arc::new(AtomicI64::new(at.us())))
    }

    /// The time now.
    pub fn now(&self) -> Time {
        match self {
            Self::System => {
                let since = SystemTime::now()
                    .duration_since(UNIX_EPOCH)
                    .unwrap_or(Duration::ZERO);
                Time::from_us(i64::try_from(since.as_micros()).unwrap_or(i64::MAX))
            }
            Self::Manual(us) => Time::from_us(us.load(Ordering::SeqCst)),
        }
    }

    /// Sets a manual clock; the system's is left alone.
    pub fn set(&self, to: Time) {
        if let Self::Manual(us) = self {
            us.store(to.us(), Ordering::SeqCst);
        }
    }
}

/// Measures how long something takes, for metrics, messages and waits. Its time is tokio's, which a
/// test can pause.
#[derive(Clone, Copy, Debug)]
pub struct Stopwatch(Instant);

impl Stopwatch {
    /// Starts.
    #[must_use]
    pub fn start() -> Self {
        Self(Instant::now())
    }

    /// Time since the start.
    pub fn elapsed(self) -> Duration {
        self.0.elapsed()
    }
}
