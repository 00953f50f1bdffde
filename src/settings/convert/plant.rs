//! `[plant]`, `[store]` and `[web]`.

use std::collections::BTreeSet;
use std::net::{Ipv4Addr, SocketAddr};

use jiff::civil::Time as WallTime;
use jiff::tz::TimeZone;

use crate::settings::check::Check;
use crate::settings::fault::FaultList;
use crate::settings::keys;
use crate::settings::section::{Field, Spot};
use crate::settings::written::{WrittenPlant, WrittenShift, WrittenStore, WrittenWeb};
use crate::settings::{PlantSettings, Shift, StoreSettings, WebSettings};

/// Where pages are when nothing else is said: this machine only.
const LISTEN: SocketAddr = SocketAddr::new(std::net::IpAddr::V4(Ipv4Addr::LOCALHOST), 7310);

/// Days that measurements are kept when nothing else is said: a quarter, the period of most reviews.
const KEEP_DAYS: u32 = 90;

/// A century; more is a slip of the keyboard.
const MOST_DAYS: i64 = 36_525;

/// The plant.
pub(super) fn plant(written: WrittenPlant, faults: &mut FaultList) -> Option<PlantSettings> {
    let WrittenPlant {
        place,
        name,
        time_zone,
        shifts,
    } = written;
    let shifts = shifts.given().map(|spot| spot.value).unwrap_or_default();
    let mut seen = BTreeSet::new();
    let names = shifts.iter().filter_map(|s| s.name.peek());
    // Those of one name are parts of one shift.
    let each = names.clone().filter(|name| seen.insert(&name.value));
    super::one_name_each("shifts", each, faults);
    let names: Vec<Option<Spot<String>>> = shifts.iter().map(|s| s.name.peek().cloned()).collect();
    let mut check = Check::new("plant", &place, faults);
    let name = check.required(name, "name");
    let name = check.name(name, "name");
    let zone = check.required(time_zone, "time_zone");
    let zone = zone_of(zone, &mut check);
    let shifts: Vec<_> = shifts.into_iter().map(|s| shift(s, faults)).collect();
    one_part_at_a_time(&shifts, &names, faults);
    Some(PlantSettings {
        name: name?,
        zone: zone?,
        shifts: shifts.into_iter().collect::<Option<_>>()?,
    })
}

/// Says which parts of one shift overlap.
fn one_part_at_a_time(
    shifts: &[Option<Shift>],
    names: &[Option<Spot<String>>],
    faults: &mut FaultList,
) {
    for (b, later) in shifts.iter().enumerate() {
        let Some(later) = later else { continue };
        let before = shifts[..b].iter().zip(names);
        let mut overlap = before.filter_map(|(s, name)| Some((s.as_ref()?, name.as_ref()?)));
        let overlap = overlap.find(|(s, _)| s.name == later.name && s.overlaps(later));
        if let (Some((_, first)), Some(Some(name))) = (overlap, names.get(b)) {
            let line = first.place.line().unwrap_or_default();
            let message = format!(
                "two shifts are called \"{}\" and overlap; the first is in line {line}",
                later.name
            );
            let hint = "give each a name of its own; parts of one shift follow each other";
            faults.add(&name.place, message, hint);
        }
    }
}

fn zone_of(field: Field<String>, check: &mut Check<'_>) -> Option<TimeZone> {
    let Spot { value, place } = field.given()?;
    if let Ok(zone) = TimeZone::get(&value) {
        return Some(zone);
    }
    let zones: Vec<String> = jiff::tz::db().available().map(|n| n.to_string()).collect();
    let message = format!("there is no time zone \"{}\"", value.escape_debug());
    let hint = match keys::nearest(&value, zones.iter().map(String::as_str)) {
        Some(near) => format!("did you mean \"{near}\"?"),
        None => keys::example("plant", "time_zone"),
    };
    check.add(&place, message, hint);
    None
}

fn shift(written: WrittenShift, faults: &mut FaultList) -> Option<Shift> {
    let WrittenShift {
        place,
        name,
        from,
        to,
    } = written;
    let mut check = Check::new("plant.shift", &place, faults);
    let name = check.required(name, "name");
    let name = check.name(name, "name");
    let from = check.required(from, "from");
    let from = wall_time(from, "from", &mut check);
    let to = check.required(to, "to");
    let to = wall_time(to, "to", &mut check);
    Some(Shift {
        name: name?,
        from: from?,
        to: to?,
    })
}

/// Hours and minutes, `06:00`.
fn wall_time(field: Field<String>, name: &str, check: &mut Check<'_>) -> Option<WallTime> {
    let Spot { value, place } = field.given()?;
    let digits = |text: &str| match text.as_bytes() {
        [a @ b'0'..=b'9', b @ b'0'..=b'9'] => i8::try_from((a - b'0') * 10 + (b - b'0')).ok(),
        _ => None,
    };
    let time = value
        .split_once(':')
        .and_then(|(hour, minute)| WallTime::new(digits(hour)?, digits(minute)?, 0, 0).ok());
    if time.is_none() {
        check.add(
            &place,
            format!("`{name}` is no time of day"),
            "write hours and minutes from \"00:00\" to \"23:59\"; midnight is \"00:00\"",
        );
    }
    time
}

/// The store.
pub(super) fn store(written: WrittenStore, faults: &mut FaultList) -> Option<StoreSettings> {
    let WrittenStore {
        place,
        folder,
        keep_days,
    } = written;
    let mut check = Check::new("store", &place, faults);
    let folder = check.required(folder, "folder");
    let folder = check.path(folder, "folder");
    let keep_days = check.whole(keep_days, "keep_days", 0..=MOST_DAYS);
    Some(StoreSettings {
        folder: folder?.value,
        keep_days: keep_days.unwrap_or(KEEP_DAYS),
    })
}

/// Pages and interface.
pub(super) fn web(written: WrittenWeb, faults: &mut FaultList) -> Option<WebSettings> {
    let WrittenWeb {
        place,
        listen,
        token_file,
        certificate_file,
        key_file,
        address,
        tls_in_front,
    } = written;
    let mut check = Check::new("web", &place, faults);
    let listen = listen_at(listen, &mut check);
    let token_missing = matches!(token_file, Field::Absent);
    let token_file = check.path(token_file, "token_file").map(|spot| spot.value);
    both_or_neither(&certificate_file, &key_file, &mut check);
    let encrypts = !matches!(certificate_file, Field::Absent);
    let certificate_file = check.path(certificate_file, "certificate_file");
    let key_file = check.path(key_file, "key_file");
    let in_clear = match &tls_in_front {
        Field::Given(spot) => !spot.value && !encrypts,
        Field::Absent => !encrypts,
        Field::Faulty => false,
    };
    if let Some(listen) = listen.as_ref().filter(|at| !at.value.ip().is_loopback()) {
        beyond_loopback(listen, token_missing, in_clear, &mut check);
    }
    Some(WebSettings {
        listen: listen.map_or(LISTEN, |spot| spot.value),
        token_file,
        tls_in_front: tls_in_front.given().is_some_and(|spot| spot.value),
        certificate_file: certificate_file.map(|spot| spot.value),
        key_file: key_file.map(|spot| spot.value),
        address: page_address(address, &mut check),
    })
}

/// A certificate is nothing without its key.
fn both_or_neither(certificate: &Field<String>, key: &Field<String>, check: &mut Check<'_>) {
    let (alone, missing) = match (certificate, key) {
        (Field::Given(spot), Field::Absent) => (spot, "key_file"),
        (Field::Absent, Field::Given(spot)) => (spot, "certificate_file"),
        _ => return,
    };
    check.add(
        &alone.place,
        format!("`{missing}` is missing beside this"),
        keys::example("web", missing),
    );
}

fn listen_at(field: Field<String>, check: &mut Check<'_>) -> Option<Spot<SocketAddr>> {
    let Spot { value, place } = field.given()?;
    if let Ok(value) = value.parse() {
        return Some(Spot { value, place });
    }
    let hint = if value.starts_with("localhost:") {
        "write the address in numbers: \"127.0.0.1:7310\"".to_owned()
    } else {
        keys::example("web", "listen")
    };
    check.add(&place, "`listen` is no address with a port", hint);
    None
}

fn beyond_loopback(
    listen: &Spot<SocketAddr>,
    token_missing: bool,
    in_clear: bool,
    check: &mut Check<'_>,
) {
    let at = listen.value;
    if token_missing {
        check.add(
            &listen.place,
            format!("{at} can be reached from other machines, and no `token_file` is given"),
            "give `token_file`, or listen on \"127.0.0.1:7310\"",
        );
    }
    if in_clear {
        check.add(
            &listen.place,
            format!("{at} can be reached from other machines, and tokens would travel in clear"),
            "give `certificate_file` and `key_file`, or put something in front that encrypts and say \
             `tls_in_front = true`, or listen on \"127.0.0.1:7310\"",
        );
    }
}

fn page_address(field: Field<String>, check: &mut Check<'_>) -> Option<String> {
    let Spot { value, place } = field.given()?;
    let good = value.parse::<http::Uri>().is_ok_and(|uri| {
        let web = matches!(uri.scheme_str(), Some("http" | "https"));
        web && uri.host().is_some_and(|host| !host.is_empty()) && uri.query().is_none()
    });
    if !good {
        let hint = keys::example("web", "address");
        check.add(&place, "`address` is no http:// or https:// address", hint);
        return None;
    }
    Some(value)
}
