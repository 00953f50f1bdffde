//! Numbers as people read them: rounded to the instrument's resolution, with the unit.

use super::Characteristic;

/// The true minus sign, as people read it.
const MINUS: char = '\u{2212}';

/// Decimal places when the resolution is unknown.
const UNKNOWN_PLACES: usize = 3;

/// More places than this help nobody.
const MOST_PLACES: usize = 9;

impl Characteristic {
    /// Decimal places of the resolution: 0.1 has one, 5 has none.
    pub fn places(&self) -> usize {
        match self.resolution {
            Some(step) if step > 0.0 => {
                let needed = (0..MOST_PLACES).find(|&p| {
                    let scaled = step * 10_f64.powi(p as i32);
                    scaled.round() >= 1.0 && (scaled - scaled.round()).abs() < 1e-9 * scaled
                });
                needed.unwrap_or(MOST_PLACES)
            }
            _ => UNKNOWN_PLACES,
        }
    }

    /// A value rounded to the resolution, without unit ("503.1").
    pub fn value(&self, value: f64) -> String {
        fixed(value, self.places())
    }

    /// A mean, which is known better than a single value: one place more ("503.12").
    pub fn mean(&self, mean: f64) -> String {
        fixed(mean, self.places() + 1)
    }

    /// A deviation with its sign, one place more than a value ("+1.25", "−3.10").
    pub fn deviation(&self, deviation: f64) -> String {
        signed(deviation, self.places() + 1)
    }
}

/// A number with a fixed count of places and a true minus sign.
pub fn fixed(value: f64, places: usize) -> String {
    let text = format!("{value:.places$}");
    match text.strip_prefix('-') {
        Some(rest) if rest.chars().any(|c| c.is_ascii_digit() && c != '0') => {
            format!("{MINUS}{rest}")
        }
        // Nothing but zeros has no sign.
        Some(rest) => rest.to_owned(),
        None => text,
    }
}

/// The same with a plus sign before what is above zero.
pub fn signed(value: f64, places: usize) -> String {
    let text = fixed(value, places);
    let is_zero = text.chars().all(|c| c == '0' || c == '.');
    if is_zero || text.starts_with(MINUS) {
        text
    } else {
        format!("+{text}")
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn measured_in(resolution: Option<f64>) -> Characteristic {
        Characteristic {
            name: "net content".into(),
            unit: "g".into(),
            resolution,
            target: None,
            declared: None,
            lower: None,
            upper: None,
        }
    }

    #[test]
    fn places_follow_the_resolution() {
        for (resolution, places) in [
            (0.1, 1),
            (0.5, 1),
            (0.05, 2),
            (0.001, 3),
            (1.0, 0),
            (5.0, 0),
            (1e-12, 9),
        ] {
            assert_eq!(
                measured_in(Some(resolution)).places(),
                places,
                "{resolution}"
            );
        }
        assert_eq!(measured_in(None).places(), 3);
    }

    #[test]
    fn numbers_carry_a_true_sign() {
        let c = measured_in(Some(0.1));
        assert_eq!(c.value(503.14), "503.1");
        assert_eq!(c.mean(-0.001), "0.00");
        assert_eq!(c.deviation(1.254), "+1.25");
        assert_eq!(c.deviation(-3.1), "−3.10");
        assert_eq!(c.deviation(0.001), "0.00");
    }
}
