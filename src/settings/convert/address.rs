//! Addresses of servers, `mqtt://host:port` and `smtps://host`: how to speak, host and port.

use crate::settings::check::Check;
use crate::settings::keys;
use crate::settings::section::{Field, Spot};

/// What an address may begin with, whether that encrypts from the start, and the port that goes
/// without saying.
pub(super) type Schemes = &'static [(&'static str, bool, u16)];

/// What an address says.
pub(super) struct Address {
    pub(super) host: String,
    pub(super) port: u16,
    /// Whether the connection is encrypted from the start.
    pub(super) tls: bool,
}

/// The address in the `url` of a section.
pub(super) fn read(
    field: Field<String>,
    section: &str,
    schemes: Schemes,
    check: &mut Check<'_>,
) -> Option<Address> {
    let Spot { value, place } = field.given()?;
    match parse(&value, schemes) {
        Ok(address) => Some(address),
        Err(Unread { message, hint }) => {
            let hint = hint.unwrap_or_else(|| keys::example(section, "url"));
            check.add(&place, message, hint);
            None
        }
    }
}

/// Why an address cannot be used.
struct Unread {
    message: String,
    hint: Option<String>,
}

fn parse(url: &str, schemes: Schemes) -> Result<Address, Unread> {
    let no = |message: &str| Unread {
        message: message.to_owned(),
        hint: None,
    };
    if !url.contains("://") {
        let [first, second] = [schemes[0].0, schemes[1].0];
        return Err(Unread {
            message: "`url` does not say how to speak".to_owned(),
            hint: Some(format!(
                "write \"{first}://{}\", or {second}:// for TLS",
                url.trim()
            )),
        });
    }
    let uri: http::Uri = url.parse().map_err(|_| no("`url` is no address"))?;
    let known = schemes.iter().find(|s| Some(s.0) == uri.scheme_str());
    let &(_, tls, port) = known.ok_or_else(|| {
        let all: Vec<String> = schemes.iter().map(|s| format!("{}://", s.0)).collect();
        no(&format!("`url` must start with {}", all.join(" or ")))
    })?;
    let authority = uri.authority().ok_or_else(|| no("`url` names no host"))?;
    if authority.as_str().contains('@') {
        return Err(Unread {
            message: "`url` holds a user or a password".to_owned(),
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
