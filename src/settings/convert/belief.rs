//! `sentinels` and `plausible`: what is believed of a value that can be read.

use crate::model::Value;
use crate::settings::Belief;
use crate::settings::check::Check;
use crate::settings::fault::FaultList;
use crate::settings::keys;
use crate::settings::raw::{Kind, Node};
use crate::settings::section::{Field, Spot};
use crate::settings::written::WrittenLimits;

/// What is believed.
pub(super) fn belief(
    sentinels: Field<Vec<Node>>,
    plausible: Field<WrittenLimits>,
    faults: &mut FaultList,
) -> Belief {
    let (lower, upper) = bounds(plausible, faults);
    let list = sentinels.given().map_or(Vec::new(), |spot| spot.value);
    let sentinels = list.into_iter().filter_map(|node| sentinel(node, faults));
    Belief {
        sentinels: sentinels.collect(),
        lower,
        upper,
    }
}

fn sentinel(node: Node, faults: &mut FaultList) -> Option<Value> {
    let text = match &node.kind {
        Kind::Whole(Some(number)) => number.to_string(),
        Kind::Number(text) => text.clone(),
        other => {
            let message = format!("a sentinel is {} and must be a number", other.what());
            return faults.none(&node.place, message, keys::example("bank", "sentinels"));
        }
    };
    match Value::parse(&text) {
        Ok(value) => Some(value),
        Err(_) => {
            let hint = "NaN and infinities are refused in any case";
            faults.none(&node.place, "a sentinel is not a finite number", hint)
        }
    }
}

fn bounds(field: Field<WrittenLimits>, faults: &mut FaultList) -> (Option<Value>, Option<Value>) {
    let Spot { value, place } = match field {
        Field::Given(spot) => spot,
        Field::Absent | Field::Faulty => return (None, None),
    };
    let WrittenLimits { lower, upper } = value;
    let mut check = Check::new("bank.plausible", &place, faults);
    let example = || keys::example("bank", "plausible");
    if matches!((&lower, &upper), (Field::Absent, Field::Absent)) {
        let message = "`plausible` holds neither `lower` nor `upper`";
        check.add(&place, message, example());
    }
    let lower = check.value(lower, "lower");
    let upper = check.value(upper, "upper");
    if let (Some(lower), Some(upper)) = (&lower, &upper)
        && lower.value.minus(upper.value) >= 0.0
    {
        check.add(&lower.place, "`lower` must lie below `upper`", example());
    }
    (lower.map(|spot| spot.value), upper.map(|spot| spot.value))
}
