//! Points in time. Everything inside the house is UTC in whole microseconds; the plant's zone
//! enters only where people read.

use std::fmt;
use std::time::Duration;

use serde::de::Error as _;
use serde::{Deserialize, Deserializer, Serialize, Serializer};

/// Microseconds in a second.
pub const US_PER_S: i64 = 1_000_000;
/// Microseconds in a day of 24 hours.
pub const US_PER_DAY: i64 = 86_400 * US_PER_S;

/// A point in time: microseconds since 1970-01-01T00:00:00Z.
///
/// Written as RFC 3339 where people or JSON read it, as the bare number in the store.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Default)]
pub struct Time(i64);

impl Time {
    /// From microseconds since the Unix epoch.
    pub const fn from_us(us: i64) -> Self {
        Self(us)
    }

    /// Microseconds since the Unix epoch.
    pub const fn us(self) -> i64 {
        self.0
    }

    /// Seconds since the Unix epoch, for metrics.
    pub fn as_seconds(self) -> f64 {
        self.0 as f64 / US_PER_S as f64
    }

    /// This time moved by `us` microseconds (either way), held at the ends of the range.
    #[must_use]
    pub const fn plus_us(self, us: i64) -> Self {
        Self(self.0.saturating_add(us))
    }

    /// Microseconds from `earlier` to this time; negative when `earlier` is later.
    pub const fn us_since(self, earlier: Self) -> i64 {
        self.0.saturating_sub(earlier.0)
    }

    /// How long to wait from `now` until this time; zero when it has passed.
    pub fn wait_from(self, now: Self) -> Duration {
        Duration::from_micros(u64::try_from(self.us_since(now)).unwrap_or(0))
    }

    /// Parses RFC 3339 with an offset or `Z`.
    ///
    /// # Errors
    /// Says what is wrong with the text.
    pub fn parse_rfc3339(text: &str) -> Result<Self, String> {
        let stamp: jiff::Timestamp = text.parse().map_err(|e: jiff::Error| e.to_string())?;
        Ok(Self(stamp.as_microsecond()))
    }

    /// The same instant for `jiff`, for writing it in a zone; `None` beyond the year 9999.
    pub fn to_jiff(self) -> Option<jiff::Timestamp> {
        jiff::Timestamp::from_microsecond(self.0).ok()
    }
}

impl fmt::Display for Time {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self.to_jiff() {
            Some(stamp) => write!(f, "{stamp}"),
            None => write!(f, "{} us", self.0),
        }
    }
}

impl Serialize for Time {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        if serializer.is_human_readable() {
            serializer.collect_str(self)
        } else {
            serializer.serialize_i64(self.0)
        }
    }
}

impl<'de> Deserialize<'de> for Time {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        if deserializer.is_human_readable() {
            let text = String::deserialize(deserializer)?;
            Self::parse_rfc3339(&text).map_err(D::Error::custom)
        } else {
            i64::deserialize(deserializer).map(Self)
        }
    }
}
