//! Numbers and times as people read them.
//!
//! Owns how statistics, counts and lengths of time are written, and times in the plant's zone. What
//! must hold: times say their offset where a reader could doubt it. Deliberately absent: figures in the
//! characteristic's unit, which [`crate::model::Characteristic`] writes, and words.

use jiff::tz::TimeZone;

use crate::model::{Time, US_PER_DAY, US_PER_S, fixed};

/// A number with a true minus sign; a dash where there is none.
pub fn plain(x: f64, places: usize) -> String {
    if x.is_finite() {
        fixed(x, places)
    } else {
        "–".to_owned()
    }
}

/// A probability with three digits.
pub fn probability(p: f64) -> String {
    if !p.is_finite() {
        return "–".to_owned();
    }
    if p == 0.0 {
        return "below 1e−300".to_owned();
    }
    if p < 0.001 {
        return format!("{p:.2e}").replace("e-", "e−");
    }
    format!("{p:.*}", if p < 0.1 { 4 } else { 3 })
}

/// A statistic with five significant digits or so.
pub fn statistic(x: f64) -> String {
    let size = x.abs();
    if size >= 1e6 {
        return format!("{x:.3e}");
    }
    plain(x, if size >= 1000.0 { 1 } else { 4 })
}

/// Degrees of freedom: whole ones bare, others with one digit.
pub fn degrees(df: &[f64]) -> String {
    let one = |x: &f64| {
        if x.is_infinite() {
            "∞".to_owned()
        } else if (x - x.round()).abs() < 1e-9 {
            plain(*x, 0)
        } else {
            plain(*x, 1)
        }
    };
    df.iter().map(one).collect::<Vec<_>>().join("; ")
}

/// A count with thin spaces between thousands.
pub fn count(n: u64) -> String {
    let digits = n.to_string();
    let mut out = String::with_capacity(digits.len() + digits.len() / 3 * 3);
    for (at, digit) in digits.chars().enumerate() {
        if at > 0 && (digits.len() - at).is_multiple_of(3) {
            out.push('\u{202f}');
        }
        out.push(digit);
    }
    out
}

/// A length of time in its two largest units at most.
pub fn span_of_time(us: i64) -> String {
    let s = us.max(0) / US_PER_S;
    match s {
        0..60 => format!("{s} s"),
        60..3600 => format!("{} min", s / 60),
        3600..86_400 if s % 3600 < 60 => format!("{} h", s / 3600),
        3600..86_400 => format!("{} h {} min", s / 3600, s % 3600 / 60),
        _ if s < 2 * 86_400 => "1 day".to_owned(),
        _ => format!("{} days", s / 86_400),
    }
}

/// Writes times in one zone, seen from one moment.
#[derive(Clone, Debug)]
pub struct Times {
    /// The plant's zone.
    pub zone: TimeZone,
    /// The moment at which the page is made.
    pub now: Time,
}

impl Times {
    /// Day, time to the second and offset.
    pub fn full(&self, at: Time) -> String {
        self.write(at, "%-d %b %Y, %H:%M:%S %:z")
    }

    /// Day, time to the minute and offset.
    pub fn minute(&self, at: Time) -> String {
        self.write(at, "%-d %b %Y, %H:%M %:z")
    }

    /// Hour and minute, with the day when that is not today.
    pub fn short(&self, at: Time) -> String {
        if self.day(at) == self.day(self.now) {
            self.write(at, "%H:%M")
        } else {
            self.write(at, "%-d %b %H:%M")
        }
    }

    /// The same to the second.
    pub fn second(&self, at: Time) -> String {
        if self.day(at) == self.day(self.now) {
            self.write(at, "%H:%M:%S")
        } else {
            self.write(at, "%-d %b %H:%M:%S")
        }
    }

    /// Reads a time: RFC 3339, or by the clock on the wall as browsers' fields write it.
    pub fn read(&self, text: &str) -> Option<Time> {
        let text = text.trim();
        if let Ok(at) = Time::parse_rfc3339(text) {
            return Some(at);
        }
        let wall: jiff::civil::DateTime = text.parse().ok()?;
        let stamp = self.zone.to_timestamp(wall).ok()?;
        Some(Time::from_us(stamp.as_microsecond()))
    }

    /// By the clock on the wall, as browsers' fields want it.
    pub fn field(&self, at: Time) -> String {
        self.write(at, "%Y-%m-%dT%H:%M")
    }

    /// How long ago.
    pub fn ago(&self, at: Time) -> String {
        span_of_time(self.now.us_since(at))
    }

    /// The last full hour at or before `at`, by the clock on the wall.
    pub fn hour_start(&self, at: Time) -> Time {
        const HOUR_US: i64 = US_PER_DAY / 24;
        let offset_us = at.to_jiff().map_or(0, |stamp| {
            i64::from(self.zone.to_offset(stamp).seconds()) * US_PER_S
        });
        let wall = at.us().saturating_add(offset_us);
        Time::from_us(wall.div_euclid(HOUR_US) * HOUR_US - offset_us)
    }

    fn day(&self, at: Time) -> String {
        self.write(at, "%F")
    }

    fn write(&self, at: Time, form: &str) -> String {
        match at.to_jiff() {
            Some(stamp) => stamp
                .to_zoned_datetime(self.zone.clone())
                .strftime(form)
                .to_string(),
            None => at.to_string(),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn probabilities_and_counts_read_well() {
        for (p, text) in [
            (0.022_661, "0.0227"),
            (0.5, "0.500"),
            (3.14e-9, "3.14e−9"),
            (0.0, "below 1e−300"),
            (f64::NAN, "–"),
        ] {
            assert_eq!(probability(p), text);
        }
        assert_eq!(count(1_234_567), "1\u{202f}234\u{202f}567");
        assert_eq!(degrees(&[9.0, 90.0]), "9; 90");
        assert_eq!(degrees(&[3.0, 17.25]), "3; 17.2");
    }

    #[test]
    fn times_are_the_plants() {
        let zone = TimeZone::get("Europe/Lisbon").expect("bundled");
        let at = Time::parse_rfc3339("2026-07-03T14:03:22Z").expect("valid");
        let times = Times { zone, now: at };
        assert_eq!(times.full(at), "3 Jul 2026, 15:03:22 +01:00");
        assert_eq!(times.short(at), "15:03");
        assert_eq!(times.short(at.plus_us(-US_PER_DAY)), "2 Jul 15:03");
        assert_eq!(times.second(times.hour_start(at)), "15:00:00");
        for text in [
            "2026-07-03T15:03:22",
            "2026-07-03T14:03:22Z",
            " 2026-07-03T15:03:22",
        ] {
            assert_eq!(times.read(text), Some(at), "{text}");
        }
        assert_eq!(times.field(at), "2026-07-03T15:03");
        assert_eq!(times.read("yesterday"), None);
        assert_eq!(times.ago(at.plus_us(-754 * US_PER_S)), "12 min");
    }
}
