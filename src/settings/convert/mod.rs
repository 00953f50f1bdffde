//! From the configuration as written to the configuration as used.
//!
//! Every part is taken apart by full destructuring, so a key that is added cannot be forgotten here.
//! Everything is checked before anything is given up, so that all faults come at once.

mod address;
mod bank;
mod belief;
mod broker;
mod feed;
mod known;
mod notices;
mod outlet;
mod pairing;
mod payload;
mod payload_named;
mod payload_placed;
mod plant;
mod pointer;
mod shifts;

use std::collections::BTreeMap;
use std::sync::Arc;

use crate::model::{BankIx, topic_name};

use super::Settings;
use super::check::unfit;
use super::fault::{FaultList, Place};
use super::list::Origins;
use super::section::{Field, Spot};
use super::written::{Written, WrittenBank, WrittenOutlet};

/// More banks than this are a mistake of whoever generated the file; the looks of as many would not
/// fit into the time between them.
const MOST_BANKS: usize = 1000;

/// The settings as used; `None` when a fault was found.
pub(super) fn used(written: Written, origins: Origins, faults: &mut FaultList) -> Option<Settings> {
    let Written {
        plant,
        broker,
        store,
        web,
        notices,
        banks,
        outlets,
    } = written;
    let name = plant.name.peek().map(|spot| spot.value.clone());
    let plant = plant::plant(plant, faults);
    let broker = broker::broker(broker, name.as_deref().unwrap_or_default(), faults);
    let store = plant::store(store, faults);
    let web = plant::web(web, faults);
    let manners = notices::manners(notices, faults);
    let of_plant = shifts::OfPlant::new(plant.as_ref());
    let known = outlet::Known::of(&banks, plant.as_ref());
    let banks = every_bank(banks, &of_plant, faults);
    let outlets = every_outlet(outlets, &known, faults);
    let (banks, feeds) = banks?.into_iter().map(|(b, f)| (Arc::new(b), f)).unzip();
    Some(Settings {
        plant: plant?,
        broker: broker?,
        store: store?,
        web: web?,
        manners,
        banks,
        feeds,
        outlets: outlets?,
        origins,
    })
}

type BankAndFeed = (crate::model::Bank, super::Feed);

fn every_bank(
    banks: Field<Vec<WrittenBank>>,
    plant: &shifts::OfPlant,
    faults: &mut FaultList,
) -> Option<Vec<BankAndFeed>> {
    let nothing = "there is no bank, so there is nothing to watch";
    let hint = "write [[bank]] and the keys under it; config/smallest.toml shows the fewest";
    let Spot { value, place } = match banks {
        Field::Given(spot) => spot,
        Field::Faulty => return None,
        Field::Absent => return faults.none(&Place::File, nothing, hint),
    };
    if value.is_empty() {
        return faults.none(&place, nothing, hint);
    }
    if value.len() > MOST_BANKS {
        let message = format!("{} banks are more than {MOST_BANKS}", value.len());
        return faults.none(&place, message, "split the plant among several daemons");
    }
    let names = value.iter().filter_map(|bank| bank.name.peek());
    one_name_each("banks", names, faults);
    let one = |(place, written)| bank::bank(BankIx(place), written, plant, faults);
    let all: Vec<_> = (0_u16..).zip(value).map(one).collect();
    all.into_iter().collect()
}

fn every_outlet(
    outlets: Field<Vec<WrittenOutlet>>,
    known: &outlet::Known,
    faults: &mut FaultList,
) -> Option<Vec<super::Outlet>> {
    let Spot { value, .. } = match outlets {
        Field::Given(spot) => spot,
        Field::Faulty => return None,
        Field::Absent => return Some(Vec::new()),
    };
    one_name_each(
        "outlets",
        value.iter().filter_map(|o| o.name.peek()),
        faults,
    );
    let one = |written| outlet::outlet(written, known, faults);
    let all: Vec<_> = value.into_iter().map(one).collect();
    all.into_iter().collect()
}

/// Says which names are there twice, in the file or in topics.
fn one_name_each<'w>(
    what: &str,
    names: impl Iterator<Item = &'w Spot<String>>,
    faults: &mut FaultList,
) {
    let mut seen: BTreeMap<String, &Spot<String>> = BTreeMap::new();
    for spot in names.filter(|spot| unfit(&spot.value).is_none()) {
        let Some(first) = seen.insert(topic_name(&spot.value), spot) else {
            continue;
        };
        let line = first.place.line().unwrap_or_default();
        let message = if first.value == spot.value {
            format!(
                "two {what} are called \"{}\"; the first is in line {line}",
                spot.value
            )
        } else {
            format!(
                "\"{}\" and \"{}\" of line {line} are the same in topics, where / + # and spaces \
                 become -",
                spot.value, first.value
            )
        };
        faults.add(&spot.place, message, "give each a name of its own");
    }
}
