//! `sources = "shifts"`: what the rest of a bank must be then.
//!
//! Such a bank has no source in topic or payload, one value of each shift a day, and a look when a shift is
//! over; keys that say otherwise are faults, because whoever wrote them expects something of them.

use jiff::tz::TimeZone;

use crate::model::{Calendar, Shift, Sources};
use crate::settings::check::{Check, D};
use crate::settings::fault::Place;
use crate::settings::section::Field;
use crate::settings::written::WrittenSources;
use crate::settings::{PlantSettings, ToldBy};

/// Spans when nothing else is said: two weeks of working days, a month, and two.
pub(super) const SPANS: [usize; 3] = [10, 20, 40];
/// A shift brings one value a day, and a look follows.
pub(super) const LOOK_EVERY_US: i64 = D;
/// A day closes with the first shift of a later one: shifts end in their order.
pub(super) const WAIT_CYCLES: u32 = 1;
/// A shift is silent after a week: weekends and a holiday pass without a word.
pub(super) const SILENT_AFTER_US: i64 = 7 * D;

/// What a bank must know of the plant.
pub(super) struct OfPlant {
    pub(super) zone: TimeZone,
    /// `None` when they are faulty.
    pub(super) shifts: Option<Vec<Shift>>,
}

impl OfPlant {
    pub(super) fn new(plant: Option<&PlantSettings>) -> Self {
        Self {
            zone: plant.map_or(TimeZone::UTC, |plant| plant.zone.clone()),
            shifts: plant.map(|plant| plant.shifts.clone()),
        }
    }
}

/// What tells the source, as far as `sources` says.
pub(super) fn told_by(sources: &Field<WrittenSources>) -> ToldBy {
    match sources.peek().map(|spot| &spot.value) {
        Some(WrittenSources::Word(word)) if word == "shifts" => ToldBy::Time,
        _ => ToldBy::Message,
    }
}

/// The shifts as sources.
pub(super) fn sources(plant: &OfPlant, place: &Place, check: &mut Check<'_>) -> Option<Sources> {
    let shifts = plant.shifts.as_ref()?;
    let calendar = Calendar::new(shifts, plant.zone.clone());
    let count = calendar.names().len();
    if count < 2 {
        let message =
            format!("`sources = \"shifts\"` needs at least two shifts, and the plant has {count}");
        let hint = "write a [[plant.shift]] with `name`, `from` and `to` for each";
        check.add(place, message, hint);
        return None;
    }
    let pairs = (1..shifts.len()).flat_map(|b| (0..b).map(move |a| (a, b)));
    let mut pairs = pairs.map(|(a, b)| (&shifts[a], &shifts[b]));
    // Parts of one shift that overlap are told where they stand.
    let overlap = pairs.find(|(a, b)| a.name != b.name && a.overlaps(b));
    if let Some((a, b)) = overlap {
        let message = format!(
            "shifts \"{}\" and \"{}\" overlap, so a value could be of either",
            a.name, b.name
        );
        let hint = "let each [[plant.shift]] end where or before the next one begins";
        check.add(place, message, hint);
        return None;
    }
    Some(Sources::Shifts(calendar))
}

/// Says which of these keys are given, since none means anything with shifts.
pub(super) fn mean_nothing(keys: &[(&str, Option<&Place>)], check: &mut Check<'_>) {
    for (name, place) in keys {
        let Some(place) = place else { continue };
        let message = format!("`{name}` means nothing with `sources = \"shifts\"`");
        let why = match *name {
            "look_every" => "a look follows each shift",
            "wait_cycles" => "a day closes with the first shift of the next one",
            "most_sources" => "the sources are the shifts of the plant",
            _ => "shifts do not stand side by side in the machine",
        };
        check.add(place, message, format!("take it out: {why}"));
    }
}
