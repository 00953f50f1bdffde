//! `[broker]`.

use std::path::PathBuf;

use crate::model::topic_name;
use crate::settings::check::{Check, D, S};
use crate::settings::fault::{FaultList, Place};
use crate::settings::keys;
use crate::settings::section::{Field, Spot};
use crate::settings::written::WrittenBroker;
use crate::settings::{Broker, Protocol};

use super::address::{self, Address};

/// Long enough for a plant's holidays over a weekend; a broker that keeps more fills up.
const SESSION_EXPIRY_US: i64 = 7 * D;

/// As many as one turn of the engine takes.
const RECEIVE_MAXIMUM: u16 = 1000;

/// A payload with a whole filler's values has a few kilobytes; this leaves room and still bounds what
/// `receive_maximum` of them can take.
const MOST_BYTES: usize = 262_144;

/// The largest packet of MQTT.
const PACKET_LIMIT: i64 = 268_435_455;

/// Between the client library's least (5 s) and what a router forgets.
const KEEP_ALIVE_US: i64 = 30 * S;

/// How a broker is spoken to: scheme, whether that encrypts, and the port when none is given.
const SCHEMES: address::Schemes = &[("mqtt", false, 1883), ("mqtts", true, 8883)];

/// The broker. `plant` names the client when `client_id` does not.
pub(super) fn broker(
    written: WrittenBroker,
    plant: &str,
    faults: &mut FaultList,
) -> Option<Broker> {
    let WrittenBroker {
        place,
        url,
        client_id,
        protocol,
        user,
        password_file,
        ca_file,
        client_certificate_file,
        client_key_file,
        session_expiry,
        receive_maximum,
        most_bytes,
        keep_alive,
    } = written;
    let mut check = Check::new("broker", &place, faults);
    let url = check.required(url, "url");
    let address = address::read(url, "broker", SCHEMES, &mut check);
    let protocol = version(protocol, &mut check);
    if protocol == Protocol::V4 {
        only_in_5(&session_expiry, "session_expiry", &mut check);
        only_in_5(&receive_maximum, "receive_maximum", &mut check);
    }
    let user_missing = matches!(user, Field::Absent);
    let user = check.name(user, "user").map(|user| user.to_string());
    let password_file = check.path(password_file, "password_file");
    if let Some(password) = password_file.as_ref().filter(|_| user_missing) {
        let hint = "give `user` too";
        check.add(
            &password.place,
            "a password without a user name says nothing",
            hint,
        );
    }
    let files = Files {
        ca: check.path(ca_file, "ca_file"),
        certificate: check.path(client_certificate_file, "client_certificate_file"),
        key: check.path(client_key_file, "client_key_file"),
    };
    files.fit(address.as_ref(), &mut check);
    let session_us = check.duration_us(session_expiry, "session_expiry", 60 * S..=40_000 * D);
    let keep_alive_us = check.duration_us(keep_alive, "keep_alive", 5 * S..=18 * 3600 * S);
    let client_id = check.name(client_id, "client_id").map(|id| id.to_string());
    let receive_maximum = check.whole(receive_maximum, "receive_maximum", 1..=65_535);
    let most_bytes = check.whole(most_bytes, "most_bytes", 1024..=PACKET_LIMIT);
    let address = address?;
    Some(Broker {
        host: address.host,
        port: address.port,
        tls: address.tls,
        client_id: client_id.unwrap_or_else(|| format!("evenrow-{}", topic_name(plant))),
        protocol,
        user,
        password_file: password_file.map(|spot| spot.value),
        ca_file: files.ca.map(|spot| spot.value),
        client_certificate_file: files.certificate.map(|spot| spot.value),
        client_key_file: files.key.map(|spot| spot.value),
        // The bounds above lie within both types.
        session_expiry_s: u32::try_from(session_us.unwrap_or(SESSION_EXPIRY_US) / S)
            .unwrap_or(u32::MAX),
        receive_maximum: receive_maximum.unwrap_or(RECEIVE_MAXIMUM),
        most_bytes: most_bytes.unwrap_or(MOST_BYTES),
        keep_alive_s: u16::try_from(keep_alive_us.unwrap_or(KEEP_ALIVE_US) / S).unwrap_or(u16::MAX),
    })
}

fn version(field: Field<i64>, check: &mut Check<'_>) -> Protocol {
    match check.whole(field, "protocol", 4..=5) {
        Some(4_u8) => Protocol::V4,
        _ => Protocol::V5,
    }
}

fn only_in_5<T>(field: &Field<T>, name: &str, check: &mut Check<'_>) {
    if let Some(spot) = field.peek() {
        let message = format!("`{name}` means nothing with `protocol = 4`");
        check.add(&spot.place, message, "take it out, or use `protocol = 5`");
    }
}

/// The files of an encrypted connection.
struct Files {
    ca: Option<Spot<PathBuf>>,
    certificate: Option<Spot<PathBuf>>,
    key: Option<Spot<PathBuf>>,
}

impl Files {
    /// Says which of them do not fit the address or each other.
    fn fit(&self, address: Option<&Address>, check: &mut Check<'_>) {
        let named = [
            ("ca_file", &self.ca),
            ("client_certificate_file", &self.certificate),
            ("client_key_file", &self.key),
        ];
        let in_clear = address.is_some_and(|address| !address.tls);
        for (name, file) in named {
            if let Some(spot) = file.as_ref().filter(|_| in_clear) {
                let message =
                    format!("`{name}` means nothing with mqtt://, which does not encrypt");
                check.add(
                    &spot.place,
                    message,
                    "write mqtts:// in `url`, or take the file out",
                );
            }
        }
        match (&self.certificate, &self.key) {
            (Some(spot), None) => lonely(
                &spot.place,
                "client_certificate_file",
                "client_key_file",
                check,
            ),
            (None, Some(spot)) => lonely(
                &spot.place,
                "client_key_file",
                "client_certificate_file",
                check,
            ),
            (Some(_), Some(_)) | (None, None) => {}
        }
    }
}

fn lonely(place: &Place, given: &str, missing: &str, check: &mut Check<'_>) {
    let message = format!("`{given}` is given without `{missing}`");
    check.add(
        place,
        message,
        format!("give both or neither; {}", keys::example("broker", missing)),
    );
}
