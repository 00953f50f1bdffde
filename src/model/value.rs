//! A measured value, kept exact: most instruments speak in decimals, and `503.1` has no exact double.

use std::fmt;

use serde::{Deserialize, Serialize};

/// A finite value: an exact decimal of up to 18 digits, or a double beyond that.
#[derive(Clone, Copy, Debug, PartialEq, Serialize, Deserialize)]
pub enum Value {
    /// `coefficient * 10^exponent`, exactly.
    Decimal {
        /// All digits as one signed whole number.
        coefficient: i64,
        /// The power of ten.
        exponent: i8,
    },
    /// A double, for more than 18 digits or an exponent beyond the range of `i8`.
    Float(f64),
}

/// Why a text is no value.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum ValueError {
    /// The text is empty.
    #[error("nothing is written where a number should be")]
    Empty,
    /// The text is no decimal number.
    #[error("is no number")]
    NotANumber,
    /// NaN, infinite, or beyond what a double can hold.
    #[error("is not a finite number")]
    NotFinite,
}

/// Largest shift of a coefficient by powers of ten that stays within `i128`:
/// 18 digits and 19 zeros are 37 digits, below the 38 that `i128` holds.
const MOST_SHIFT: u32 = 19;

impl Value {
    /// Parses decimal text (`-12.50`, `1e3`, surrounding blanks allowed) without losing a digit
    /// where 18 digits suffice.
    ///
    /// # Errors
    /// [`ValueError`] when the text is empty, no number, or not finite.
    pub fn parse(text: &str) -> Result<Self, ValueError> {
        let text = text.trim();
        if text.is_empty() {
            return Err(ValueError::Empty);
        }
        if let Some(value) = exact(text.as_bytes()) {
            return Ok(value);
        }
        let float: f64 = text.parse().map_err(|_| ValueError::NotANumber)?;
        Self::from_f64(float)
    }

    /// A double as a value.
    ///
    /// # Errors
    /// [`ValueError::NotFinite`] for NaN and infinities.
    pub fn from_f64(value: f64) -> Result<Self, ValueError> {
        if value.is_finite() {
            Ok(Self::Float(value))
        } else {
            Err(ValueError::NotFinite)
        }
    }

    /// The nearest double.
    pub fn to_f64(self) -> f64 {
        match self {
            Self::Decimal {
                coefficient,
                exponent,
            } => decimal_to_f64(i128::from(coefficient), exponent),
            Self::Float(value) => value,
        }
    }

    /// `self - origin`, subtracted in decimal before rounding to a double, so that
    /// `1000000000000.4 - 1000000000000.2` is the double nearest to `0.2`.
    pub fn minus(self, origin: Self) -> f64 {
        let (
            Self::Decimal {
                coefficient: a,
                exponent: ea,
            },
            Self::Decimal {
                coefficient: b,
                exponent: eb,
            },
        ) = (self, origin)
        else {
            return self.to_f64() - origin.to_f64();
        };
        let least = ea.min(eb);
        let up = |c: i64, e: i8| -> Option<i128> {
            let shift = u32::from(i16::from(e).abs_diff(i16::from(least)));
            if c == 0 {
                return Some(0);
            }
            (shift <= MOST_SHIFT).then(|| i128::from(c) * 10_i128.pow(shift))
        };
        match (up(a, ea), up(b, eb)) {
            (Some(a), Some(b)) => decimal_to_f64(a - b, least),
            _ => self.to_f64() - origin.to_f64(),
        }
    }
}

/// Reads plain decimal notation; `None` leaves the text to the general parser.
fn exact(text: &[u8]) -> Option<Value> {
    let (negative, digits) = match text {
        [b'-', rest @ ..] => (true, rest),
        [b'+', rest @ ..] => (false, rest),
        rest => (false, rest),
    };
    let (mut coefficient, mut exponent, mut seen, mut point) = (0_i64, 0_i32, 0_u32, false);
    let mut rest = digits.iter().enumerate();
    for (at, &byte) in rest.by_ref() {
        match byte {
            b'0'..=b'9' => {
                coefficient = coefficient
                    .checked_mul(10)?
                    .checked_add(i64::from(byte - b'0'))?;
                seen += 1;
                exponent -= i32::from(point);
            }
            b'.' if !point => point = true,
            b'e' | b'E' if seen > 0 => {
                let power: i32 = std::str::from_utf8(&digits[at + 1..]).ok()?.parse().ok()?;
                exponent = exponent.checked_add(power)?;
                break;
            }
            _ => return None,
        }
    }
    // 18 digits always fit an i64 and leave room for the shift in `minus`.
    if seen == 0 || coefficient >= 1_000_000_000_000_000_000 {
        return None;
    }
    let signed = if negative { -coefficient } else { coefficient };
    Some(Value::Decimal {
        coefficient: signed,
        exponent: i8::try_from(exponent).ok()?,
    })
}

/// `coefficient * 10^exponent`, correctly rounded.
fn decimal_to_f64(coefficient: i128, exponent: i8) -> f64 {
    // Powers of ten to 22 and coefficients to 2^53 are exact doubles: one correctly rounded operation.
    if coefficient.unsigned_abs() <= 1 << 53 && exponent.unsigned_abs() <= 22 {
        let power = 10_f64.powi(i32::from(exponent.unsigned_abs()));
        let c = coefficient as f64;
        return if exponent < 0 { c / power } else { c * power };
    }
    // The standard library's parser rounds correctly.
    format!("{coefficient}e{exponent}")
        .parse()
        .unwrap_or(f64::MAX.copysign(coefficient as f64))
}

impl fmt::Display for Value {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::Decimal {
                coefficient,
                exponent,
            } if (-18..0).contains(&exponent) => {
                let places = usize::from(exponent.unsigned_abs());
                let digits = format!("{:0>1$}", coefficient.unsigned_abs(), places + 1);
                let (whole, part) = digits.split_at(digits.len() - places);
                let sign = if coefficient < 0 { "-" } else { "" };
                write!(f, "{sign}{whole}.{part}")
            }
            Self::Decimal {
                coefficient,
                exponent: 0,
            } => write!(f, "{coefficient}"),
            Self::Decimal {
                coefficient,
                exponent,
            } => write!(f, "{coefficient}e{exponent}"),
            Self::Float(value) => write!(f, "{value}"),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn parsed(text: &str) -> Value {
        Value::parse(text).expect(text)
    }

    #[test]
    fn decimals_are_kept_to_the_digit() {
        for text in [
            "503.1",
            "-0.05",
            "0",
            "12",
            "0.000001",
            "-120.50",
            "999999999999999999",
        ] {
            assert_eq!(parsed(text).to_string(), text);
        }
        assert_eq!(parsed("1e3").to_f64(), 1000.0);
        assert_eq!(parsed("+2.5E-1").to_f64(), 0.25);
        assert_eq!(parsed(" 7 ").to_f64(), 7.0);
    }

    #[test]
    fn the_origin_is_taken_off_before_rounding() {
        assert_eq!(
            parsed("1000000000000.4").minus(parsed("1000000000000.2")),
            0.2
        );
        assert_eq!(parsed("503.1").minus(parsed("503")), 0.1);
        assert_eq!(parsed("1e30").minus(parsed("1")), 1e30);
        assert_eq!(parsed("5").minus(Value::Float(0.5)), 4.5);
    }

    #[test]
    fn rubbish_is_refused_by_name() {
        for (text, error) in [
            ("", ValueError::Empty),
            ("  ", ValueError::Empty),
            ("abc", ValueError::NotANumber),
            ("1,5", ValueError::NotANumber),
            ("--1", ValueError::NotANumber),
            ("0x10", ValueError::NotANumber),
            ("NaN", ValueError::NotFinite),
            ("inf", ValueError::NotFinite),
            ("1e999", ValueError::NotFinite),
        ] {
            assert_eq!(Value::parse(text), Err(error), "{text:?}");
        }
    }

    #[test]
    fn long_numbers_become_doubles() {
        assert!(matches!(parsed("3.14159265358979323846"), Value::Float(_)));
    }

    proptest::proptest! {
        #[test]
        fn text_and_value_agree_with_the_standard_parser(c in -999_999_999_999_999_999_i64..=999_999_999_999_999_999, e in -30_i8..30) {
            let text = format!("{c}e{e}");
            proptest::prop_assert_eq!(parsed(&text).to_f64(), text.parse::<f64>().unwrap());
            proptest::prop_assert_eq!(parsed(&parsed(&text).to_string()).to_f64(), text.parse::<f64>().unwrap());
        }
    }
}
