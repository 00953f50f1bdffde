//! `pairing`: how values of different sources belong together.

use crate::model::Pairing;
use crate::settings::ToldBy;
use crate::settings::check::{Check, D, S};
use crate::settings::fault::Place;
use crate::settings::section::{Field, Spot};
use crate::settings::written::WrittenPairing;

/// How values belong together; the payload may be without a cycle.
pub(super) fn pairing(
    field: Field<WrittenPairing>,
    (told_by, without_cycle): (ToldBy, bool),
    check: &mut Check<'_>,
) -> Option<Pairing> {
    let Spot { value, place } = check.required(field, "pairing").given()?;
    if told_by == ToldBy::Time {
        return of_shifts(&value, &place, check);
    }
    match value {
        WrittenPairing::Word(word) if word == "day" => {
            let message = "`pairing = \"day\"` needs `sources = \"shifts\"`";
            let hint =
                "shifts share a production day; other sources share a cycle or a slot of time";
            check.add(&place, message, hint);
            None
        }
        WrittenPairing::Word(word) => {
            let known = [("cycle", Pairing::Cycle), ("none", Pairing::None)];
            let word = Field::Given(Spot { value: word, place });
            let pairing = check.word(word, "pairing", &known)?;
            if pairing.value == Pairing::Cycle && without_cycle {
                let message =
                    "pairing by cycle needs the cycle, and `payload` has no pointer to it";
                let hint = "write `cycle = \"/n\"` into a payload of form \"json\", or pair by \
                            { slot = \"10s\" } or \"none\"";
                check.add(&pairing.place, message, hint);
            }
            Some(pairing.value)
        }
        WrittenPairing::Slot { place, slot } => {
            let mut check = check.inside("bank.pairing", &place);
            let slot = check.required(slot, "slot");
            let length_us = check.duration_us(slot, "slot", S / 1000..=31 * D)?;
            Some(Pairing::Slot { length_us })
        }
    }
}

/// Shifts share a day and nothing else.
fn of_shifts(value: &WrittenPairing, place: &Place, check: &mut Check<'_>) -> Option<Pairing> {
    if matches!(value, WrittenPairing::Word(word) if word == "day") {
        return Some(Pairing::Day);
    }
    let message = "shifts are paired by production day";
    let hint = "write `pairing = \"day\"`: what moves all shifts of a day is no difference between \
                them";
    check.add(place, message, hint);
    None
}

/// Says when there is nothing to wait for.
pub(super) fn waits_for_cycles(
    field: &Field<i64>,
    pairing: Option<Pairing>,
    check: &mut Check<'_>,
) {
    if let (Some(spot), Some(Pairing::Slot { .. } | Pairing::None)) = (field.peek(), pairing) {
        let message = "`wait_cycles` means nothing unless the bank pairs by cycle";
        check.add(
            &spot.place,
            message,
            "take it out, or write `pairing = \"cycle\"`",
        );
    }
}
