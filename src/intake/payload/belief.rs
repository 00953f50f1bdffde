//! What is believed of a value that can be read: no sentinel, and within what is plausible.
//!
//! Deliberately absent: the limits of the characteristic. A value beyond them is bad product and a
//! true measurement; one that is implausible is no measurement at all.

use crate::model::{Reason, Value};
use crate::settings::Belief;

use super::Fault;

/// The value, when it is believed.
///
/// # Errors
/// [`Reason::Sentinel`] and [`Reason::Implausible`], with the words for it.
pub fn believed(belief: &Belief, value: Value) -> Result<Value, Fault> {
    let Belief {
        sentinels,
        lower,
        upper,
    } = belief;
    if sentinels
        .iter()
        .any(|sentinel| value.minus(*sentinel) == 0.0)
    {
        let detail = format!(
            "{value} is one of `sentinels`, by which the instrument says that it has no value"
        );
        return Err(Fault::new(Reason::Sentinel, detail));
    }
    let implausible = |side: &str, bound: Value| {
        let detail = format!("{value} lies {side} {bound}, where `plausible` ends");
        Err(Fault::new(Reason::Implausible, detail))
    };
    match (lower, upper) {
        (Some(lower), _) if value.minus(*lower) < 0.0 => implausible("below", *lower),
        (_, Some(upper)) if value.minus(*upper) > 0.0 => implausible("above", *upper),
        _ => Ok(value),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn value(text: &str) -> Value {
        Value::parse(text).expect(text)
    }

    #[test]
    fn sentinels_and_the_implausible_are_refused() {
        let belief = Belief {
            sentinels: vec![value("-127"), value("9999.0")],
            lower: Some(value("0")),
            upper: Some(value("1000.5")),
        };
        for (text, outcome) in [
            ("503.1", Ok(())),
            ("0", Ok(())),
            ("1000.50", Ok(())),
            ("-127.00", Err(Reason::Sentinel)),
            ("9999", Err(Reason::Sentinel)),
            ("9999.000000000000000000001", Err(Reason::Sentinel)),
            ("-0.1", Err(Reason::Implausible)),
            ("1000.51", Err(Reason::Implausible)),
            ("1e300", Err(Reason::Implausible)),
        ] {
            let got = believed(&belief, value(text))
                .map(|_| ())
                .map_err(|f| f.reason);
            assert_eq!(got, outcome, "{text}");
        }
        assert!(believed(&Belief::default(), value("-1e300")).is_ok());
    }
}
