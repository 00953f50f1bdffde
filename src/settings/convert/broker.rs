//! `[broker]`.

use std::path::PathBuf;

use crate::model::topic_name;
use crate::settings::check::{Check, D, S};
use crate::settings::fault::{FaultList, Place};
use crate::settings::keys;
use crate::settings::section::{Field, Spot};
use crate::settings::written::WrittenBroker;
use crate::settings::{Broker, Protocol};

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
    let address = address(url, &mut check);
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

/// What a URL says.
struct Address {
    host: String,
    port: u16,
    tls: bool,
}

fn address(field: Field<String>, check: &mut Check<'_>) -> Option<Address> {
    let Spot { value, place } = field.given()?;
    match parse(&value) {
        Ok(address) => Some(address),
        Err(Unread { message, hint }) => {
            let hint = hint.unwrap_or_else(|| keys::example("broker", "url"));
            check.add(&place, message, hint);
            None
        }
    }
}

/// Why a URL cannot be used.
struct Unread {
    message: &'static str,
    hint: Option<String>,
}

fn parse(url: &str) -> Result<Address, Unread> {
    let no = |message| Unread {
        message,
        hint: None,
    };
    if !url.contains("://") {
        return Err(Unread {
            message: "`url` does not say how to speak",
            hint: Some(format!(
                "write \"mqtt://{}\", or mqtts:// for TLS",
                url.trim()
            )),
        });
    }
    let uri: http::Uri = url.parse().map_err(|_| no("`url` is no address"))?;
    let (tls, port) = match uri.scheme_str() {
        Some("mqtt") => (false, 1883),
        Some("mqtts") => (true, 8883),
        _ => return Err(no("`url` must start with mqtt:// or mqtts://")),
    };
    let authority = uri.authority().ok_or_else(|| no("`url` names no host"))?;
    if authority.as_str().contains('@') {
        return Err(Unread {
            message: "`url` holds a user or a password",
            hint: Some("give `user` and `password_file` instead".to_owned()),
        });
    }
    if !matches!(uri.path(), "" | "/") || uri.query().is_some() {
        return Err(no("`url` goes on after the host and port"));
    }
    let host = authority.host();
    let rest = authority.as_str().strip_prefix(host).unwrap_or_default();
    let port = match rest.strip_prefix(':') {
        None => port,
        Some(digits) => match digits.parse::<u16>() {
            Ok(port) if port > 0 => port,
            _ => return Err(no("the port of `url` must lie between 1 and 65535")),
        },
    };
    // An IPv6 address is bracketed in a URL and nowhere else.
    let host = host
        .trim_start_matches('[')
        .trim_end_matches(']')
        .to_owned();
    if host.is_empty() {
        return Err(no("`url` names no host"));
    }
    Ok(Address { host, port, tls })
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
