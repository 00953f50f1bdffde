//! `sources = "shifts"`: what it becomes, and the slips around it.

use crate::model::{Pairing, Sources};
use crate::settings::ToldBy;

use super::{GOOD, check, faults_of, settings};

const LATE: &str = "[[plant.shift]]\nname = \"late\"\nfrom = \"14:00\"\nto = \"22:00\"\n";
const AFTER_EARLY: &str = "to = \"14:00\"\n";

/// The good configuration with two shifts, which are its sources. The bank begins in line 18.
fn shifts() -> String {
    let at = GOOD.find(AFTER_EARLY).expect("a shift") + AFTER_EARLY.len();
    let (before, after) = GOOD.split_at(at);
    format!("{before}{LATE}{after}")
        .replace("head/{source}/net", "net")
        .replace("[\"01\", \"02\", \"03\", \"04\"]", "\"shifts\"")
        .replace("\"cycle\"", "\"day\"")
        .replace(", cycle = \"/n\"", "")
        .replace("spans = [10, 40]\n", "")
}

fn with(from: &str, to: &str) -> String {
    let text = shifts();
    assert!(text.contains(from), "{from} is not in\n{text}");
    text.replacen(from, to, 1)
}

#[test]
fn the_shifts_are_the_sources_and_days_are_counted() {
    let used = settings(&shifts()).expect("good");
    let bank = &used.banks[0];
    let Sources::Shifts(calendar) = &bank.sources else {
        panic!("{:?}", bank.sources);
    };
    let names: Vec<&str> = calendar.names().map(AsRef::as_ref).collect();
    assert_eq!(names, ["early", "late"]);
    assert_eq!((bank.pairing, bank.is_watched()), (Pairing::Day, false));
    assert_eq!(bank.spans, [10, 20, 40]);
    assert_eq!(bank.look_every_us, 86_400_000_000);
    assert_eq!(bank.silent_after_us, Some(7 * 86_400_000_000));
    assert_eq!(bank.wait_cycles, 1);
    assert_eq!(used.feeds[0].told_by, ToldBy::Time);
    let others = settings(GOOD).expect("good");
    assert_eq!(others.feeds[0].told_by, ToldBy::Message);
}

#[test]
fn parts_of_one_name_are_one_shift_also_for_outlets() {
    let again = LATE
        .replace("late", "early")
        .replace("22:00", "23:00")
        .replace("14:00", "22:00");
    let outlet = "[[outlet]]\nname = \"bell\"\nway = \"command\"\nprogram = \"/bin/true\"\nshifts = [\"early\"]\n";
    let text = with("[broker]", &format!("{again}[broker]")) + outlet;
    let used = settings(&text).expect("good");
    let Sources::Shifts(calendar) = &used.banks[0].sources else {
        panic!("shifts");
    };
    assert_eq!(calendar.names().len(), 2);
    assert_eq!(used.outlets[0].route.shifts.len(), 2);
}

#[test]
#[rustfmt::skip]
fn slips() {
    assert_eq!(faults_of(&shifts(), &[]), []);
    check(&shifts().replace(LATE, ""), 20, "needs at least two shifts, and the plant has 1|[[plant.shift]]");
    check(&shifts().replace("name = \"late\"", "name = \"early\""), 24, "needs at least two shifts, and the plant has 1");
    for (from, to, line, words) in [
        ("from = \"14:00\"", "from = \"13:59\"", 24, "\"early\" and \"late\" overlap|where or before the next"),
        ("pairing = \"day\"", "pairing = \"cycle\"", 25, "paired by production day|pairing = \"day\""),
        ("pairing = \"day\"", "pairing = \"none\"", 25, "paired by production day"),
        ("pairing = \"day\"", "pairing = { slot = \"8h\" }", 25, "paired by production day"),
        ("pairing = \"day\"\n", "", 18, "`pairing` is missing"),
        ("filler2/net", "filler2/{source}/net", 22, "a source is named|the time tells it|another bank"),
        ("value = \"/v\"", "value = \"/v\", source = \"/head\"", 23, "a source is named|take the source out"),
        ("pairing", "look_every = \"1h\"\npairing", 25, "`look_every` means nothing with `sources = \"shifts\"`|follows each shift"),
        ("pairing", "wait_cycles = 3\npairing", 25, "`wait_cycles` means nothing"),
        ("pairing", "most_sources = 3\npairing", 25, "`most_sources` means nothing"),
        ("pairing", "layout = \"ring\"\npairing", 25, "`layout` means nothing|side by side"),
        ("pairing", "groups = { a = [\"early\"] }\npairing", 25, "`groups` means nothing"),
        ("pairing", "silent_after = \"10min\"\npairing", 25, "between 2 d and 366 d"),
        ("pairing", "reference = \"eraly\"\npairing", 25, "no source|did you mean \"early\""),
    ] {
        check(&with(from, to), line, words);
    }
    let others = GOOD.replace("pairing = \"cycle\"", "pairing = \"day\"");
    check(&others, 21, "needs `sources = \"shifts\"`|cycle or a slot");
}
