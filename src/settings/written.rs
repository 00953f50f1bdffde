//! The configuration as written: every key optional, every value with its place, types checked and
//! meaning not.

mod outlet;

pub(super) use outlet::WrittenOutlet;

use super::fault::{FaultList, Place};
use super::raw::{Kind, Node, Table};
use super::section::{Field, Section};
use super::written_payload::{WrittenPayload, payload};

/// The whole.
pub(super) struct Written {
    pub(super) plant: WrittenPlant,
    pub(super) broker: WrittenBroker,
    pub(super) store: WrittenStore,
    pub(super) web: WrittenWeb,
    pub(super) notices: WrittenNotices,
    pub(super) banks: Field<Vec<WrittenBank>>,
    pub(super) outlets: Field<Vec<WrittenOutlet>>,
}

/// `[plant]`.
pub(super) struct WrittenPlant {
    pub(super) place: Place,
    pub(super) name: Field<String>,
    pub(super) time_zone: Field<String>,
    pub(super) shifts: Field<Vec<WrittenShift>>,
}

/// `[[plant.shift]]`.
pub(super) struct WrittenShift {
    pub(super) place: Place,
    pub(super) name: Field<String>,
    pub(super) from: Field<String>,
    pub(super) to: Field<String>,
}

/// `[broker]`.
pub(super) struct WrittenBroker {
    pub(super) place: Place,
    pub(super) url: Field<String>,
    pub(super) client_id: Field<String>,
    pub(super) protocol: Field<i64>,
    pub(super) user: Field<String>,
    pub(super) password_file: Field<String>,
    pub(super) ca_file: Field<String>,
    pub(super) client_certificate_file: Field<String>,
    pub(super) client_key_file: Field<String>,
    pub(super) session_expiry: Field<String>,
    pub(super) receive_maximum: Field<i64>,
    pub(super) most_bytes: Field<i64>,
    pub(super) keep_alive: Field<String>,
}

/// `[store]`.
pub(super) struct WrittenStore {
    pub(super) place: Place,
    pub(super) folder: Field<String>,
    pub(super) keep_days: Field<i64>,
}

/// `[web]`.
pub(super) struct WrittenWeb {
    pub(super) place: Place,
    pub(super) listen: Field<String>,
    pub(super) token_file: Field<String>,
    pub(super) certificate_file: Field<String>,
    pub(super) key_file: Field<String>,
    pub(super) address: Field<String>,
    pub(super) tls_in_front: Field<bool>,
}

/// `[notices]`.
pub(super) struct WrittenNotices {
    pub(super) place: Place,
    pub(super) longest_shelving: Field<String>,
    pub(super) latching: Field<bool>,
    pub(super) repeat_after: Field<String>,
    pub(super) on_delay: Field<String>,
    pub(super) off_delay: Field<String>,
    pub(super) settling: Field<String>,
}

/// `[[bank]]`.
pub(super) struct WrittenBank {
    pub(super) place: Place,
    pub(super) name: Field<String>,
    pub(super) equipment: Field<String>,
    pub(super) characteristic: Field<String>,
    pub(super) unit: Field<String>,
    pub(super) resolution: Field<String>,
    pub(super) target: Field<String>,
    pub(super) declared: Field<String>,
    pub(super) limits: Field<WrittenLimits>,
    pub(super) topic: Field<String>,
    pub(super) payload: Field<WrittenPayload>,
    pub(super) sentinels: Field<Vec<Node>>,
    pub(super) plausible: Field<WrittenLimits>,
    pub(super) sources: Field<WrittenSources>,
    pub(super) most_sources: Field<i64>,
    pub(super) pairing: Field<WrittenPairing>,
    pub(super) spans: Field<Vec<Node>>,
    pub(super) look_every: Field<String>,
    pub(super) margin: Field<String>,
    pub(super) spread_margin: Field<String>,
    pub(super) false_calls: Field<String>,
    pub(super) wait_cycles: Field<i64>,
    pub(super) silent_after: Field<String>,
    pub(super) oldest_days: Field<i64>,
    pub(super) layout: Field<String>,
    pub(super) groups: Field<Node>,
    pub(super) cost_per_unit: Field<String>,
    pub(super) reference: Field<String>,
    pub(super) offsets: Field<Node>,
    pub(super) recording: Field<WrittenRecording>,
}

/// `limits` and `plausible`.
pub(super) struct WrittenLimits {
    pub(super) lower: Field<String>,
    pub(super) upper: Field<String>,
}

/// `sources`: a word or a list.
pub(super) enum WrittenSources {
    Word(String),
    Listed(Vec<Node>),
}

/// `pairing`: a word or a table.
pub(super) enum WrittenPairing {
    Word(String),
    Slot { place: Place, slot: Field<String> },
}

/// `recording`.
pub(super) struct WrittenRecording {
    pub(super) time: Field<String>,
    pub(super) source: Field<String>,
    pub(super) value: Field<String>,
    pub(super) cycle: Field<String>,
    pub(super) bank: Field<String>,
}

impl Written {
    /// Reads the tree.
    pub(super) fn read(root: Node, faults: &mut FaultList) -> Self {
        let table = match root.kind {
            Kind::Table(table) => table,
            // The root of a TOML document is a table.
            _ => Table::new(),
        };
        let mut top = Section::new("", root.place, table);
        let written = Self {
            plant: WrittenPlant::read(part(&mut top, "plant", faults), faults),
            broker: WrittenBroker::read(part(&mut top, "broker", faults), faults),
            store: WrittenStore::read(part(&mut top, "store", faults), faults),
            web: WrittenWeb::read(part(&mut top, "web", faults), faults),
            notices: WrittenNotices::read(part(&mut top, "notices", faults), faults),
            banks: top
                .sections("bank", "bank", faults)
                .map(|list, _| each(list, faults, WrittenBank::read)),
            outlets: top
                .sections("outlet", "outlet", faults)
                .map(|list, _| each(list, faults, WrittenOutlet::read)),
        };
        top.close(faults);
        written
    }
}

/// A section of the top, empty when it is not there.
fn part(top: &mut Section, name: &'static str, faults: &mut FaultList) -> Section {
    match top.section(name, name, faults) {
        Field::Given(spot) => spot.value,
        Field::Absent => Section::new(name, Place::File, Table::new()),
        Field::Faulty => Section::faulty(name),
    }
}

/// Sections of a repeated heading, read by `read`.
fn each<T>(
    list: Vec<Section>,
    faults: &mut FaultList,
    read: impl Fn(Section, &mut FaultList) -> T,
) -> Vec<T> {
    list.into_iter()
        .map(|section| read(section, faults))
        .collect()
}

impl WrittenPlant {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            place: s.place.clone(),
            name: s.text("name", faults),
            time_zone: s.text("time_zone", faults),
            shifts: s
                .sections("shift", "plant.shift", faults)
                .map(|list, _| each(list, faults, WrittenShift::read)),
        };
        s.close(faults);
        written
    }
}

impl WrittenShift {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            place: s.place.clone(),
            name: s.text("name", faults),
            from: s.text("from", faults),
            to: s.text("to", faults),
        };
        s.close(faults);
        written
    }
}

impl WrittenBroker {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            place: s.place.clone(),
            url: s.text("url", faults),
            client_id: s.text("client_id", faults),
            protocol: s.whole("protocol", faults),
            user: s.text("user", faults),
            password_file: s.text("password_file", faults),
            ca_file: s.text("ca_file", faults),
            client_certificate_file: s.text("client_certificate_file", faults),
            client_key_file: s.text("client_key_file", faults),
            session_expiry: s.text("session_expiry", faults),
            receive_maximum: s.whole("receive_maximum", faults),
            most_bytes: s.whole("most_bytes", faults),
            keep_alive: s.text("keep_alive", faults),
        };
        s.close(faults);
        written
    }
}

impl WrittenStore {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            place: s.place.clone(),
            folder: s.text("folder", faults),
            keep_days: s.whole("keep_days", faults),
        };
        s.close(faults);
        written
    }
}

impl WrittenWeb {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            place: s.place.clone(),
            listen: s.text("listen", faults),
            token_file: s.text("token_file", faults),
            certificate_file: s.text("certificate_file", faults),
            key_file: s.text("key_file", faults),
            address: s.text("address", faults),
            tls_in_front: s.flag("tls_in_front", faults),
        };
        s.close(faults);
        written
    }
}

impl WrittenNotices {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            place: s.place.clone(),
            longest_shelving: s.text("longest_shelving", faults),
            latching: s.flag("latching", faults),
            repeat_after: s.text("repeat_after", faults),
            on_delay: s.text("on_delay", faults),
            off_delay: s.text("off_delay", faults),
            settling: s.text("settling", faults),
        };
        s.close(faults);
        written
    }
}

impl WrittenBank {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            place: s.place.clone(),
            name: s.text("name", faults),
            equipment: s.text("equipment", faults),
            characteristic: s.text("characteristic", faults),
            unit: s.text("unit", faults),
            resolution: s.number("resolution", faults),
            target: s.number("target", faults),
            declared: s.number("declared", faults),
            limits: s
                .section("limits", "bank.limits", faults)
                .map(|section, _| WrittenLimits::read(section, faults)),
            topic: s.text("topic", faults),
            payload: payload(&mut s, faults),
            sentinels: s.list("sentinels", faults),
            plausible: s
                .section("plausible", "bank.plausible", faults)
                .map(|section, _| WrittenLimits::read(section, faults)),
            sources: sources(&mut s, faults),
            most_sources: s.whole("most_sources", faults),
            pairing: pairing(&mut s, faults),
            spans: s.list("spans", faults),
            look_every: s.text("look_every", faults),
            margin: s.number("margin", faults),
            spread_margin: s.number("spread_margin", faults),
            false_calls: s.text("false_calls", faults),
            wait_cycles: s.whole("wait_cycles", faults),
            silent_after: s.text("silent_after", faults),
            oldest_days: s.whole("oldest_days", faults),
            layout: s.text("layout", faults),
            groups: s.node("groups"),
            cost_per_unit: s.number("cost_per_unit", faults),
            reference: s.text("reference", faults),
            offsets: s.node("offsets"),
            recording: s
                .section("recording", "bank.recording", faults)
                .map(|section, _| WrittenRecording::read(section, faults)),
        };
        s.close(faults);
        written
    }
}

impl WrittenLimits {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            lower: s.number("lower", faults),
            upper: s.number("upper", faults),
        };
        s.close(faults);
        written
    }
}

impl WrittenRecording {
    fn read(mut s: Section, faults: &mut FaultList) -> Self {
        let written = Self {
            time: s.text("time", faults),
            source: s.text("source", faults),
            value: s.text("value", faults),
            cycle: s.text("cycle", faults),
            bank: s.text("bank", faults),
        };
        s.close(faults);
        written
    }
}

fn sources(s: &mut Section, faults: &mut FaultList) -> Field<WrittenSources> {
    let how = |kind, _: &Place, _: &mut FaultList| match kind {
        Kind::Text(word) => Ok(WrittenSources::Word(word)),
        Kind::List(list) => Ok(WrittenSources::Listed(list)),
        other => Err(other.what()),
    };
    s.either("sources", "a list, \"discover\" or \"shifts\"", faults, how)
}

fn pairing(s: &mut Section, faults: &mut FaultList) -> Field<WrittenPairing> {
    let how = |kind, place: &Place, faults: &mut FaultList| match kind {
        Kind::Text(word) => Ok(WrittenPairing::Word(word)),
        Kind::Table(table) => {
            let mut section = Section::new("bank.pairing", place.clone(), table);
            let slot = match section.text("slot", faults) {
                // Another way to pair is asked for, so the slot is not what is missing.
                Field::Absent if section.holds_later() => Field::Faulty,
                slot => slot,
            };
            section.close(faults);
            let place = place.clone();
            Ok(WrittenPairing::Slot { place, slot })
        }
        other => Err(other.what()),
    };
    s.either("pairing", "a word or a table", faults, how)
}
