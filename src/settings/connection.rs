//! The broker's settings turned into connection options, the same for the connection that listens
//! and the one that speaks; and what other connections need of it: passwords and authorities.
//!
//! Secrets and certificates are read anew for each connection, so a renewed password or certificate
//! needs no restart, and they are kept nowhere else. Owns the wait between two attempts and the
//! words in which a failed connection is told. Deliberately absent: connecting, and what belongs to
//! one of the two connections alone (session, last will).

mod trouble;

use std::fs;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::time::Duration;

use rumqttc::{TlsConfiguration, Transport};
use rustls::ClientConfig;
use rustls::pki_types::pem::PemObject;
use rustls::pki_types::{CertificateDer, PrivateKeyDer};

use super::Broker;

pub use trouble::{trouble_v4, trouble_v5};

/// How long the connection and its handshake may take. Longer than a broker that is up needs, short
/// enough that a dead address is told about within the first quarter of a minute.
const CONNECT_TIMEOUT_S: u64 = 10;

/// rumqttc refuses shorter ones for MQTT 5 by panicking.
const LEAST_KEEP_ALIVE_S: u16 = 5;

/// Why the files that a connection needs cannot be used.
#[derive(Debug, thiserror::Error)]
pub enum ConnectionFileError {
    /// A file cannot be read.
    #[error("{what} {} cannot be read: {source}", file.display())]
    Unreadable {
        /// The key's meaning ("password file").
        what: &'static str,
        /// Which file.
        file: PathBuf,
        /// What the system says.
        source: std::io::Error,
    },
    /// A file is read, and what should be in it is not.
    #[error("{what} {} holds no {wanted} in PEM form", file.display())]
    Nothing {
        /// The key's meaning.
        what: &'static str,
        /// Which file.
        file: PathBuf,
        /// What was looked for.
        wanted: &'static str,
    },
    /// No `ca_file` is given and the system trusts nobody.
    #[error("the system has no trusted authorities; give `ca_file`")]
    NoSystemAuthorities,
    /// Certificate and key are readable and do not work.
    #[error("the certificates that the settings name cannot be used: {0}")]
    Unusable(#[from] rustls::Error),
}

/// What a connection needs beside the settings.
#[derive(Clone)]
pub struct Secrets {
    password: Option<String>,
    tls: Option<Arc<ClientConfig>>,
}

impl Secrets {
    /// Reads password, authorities, certificate and key from the files that `broker` names.
    ///
    /// # Errors
    /// When a file cannot be read or does not hold what it should.
    pub fn read(broker: &Broker) -> Result<Self, ConnectionFileError> {
        let password = broker.password_file.as_deref().map(password).transpose()?;
        let tls = broker.tls.then(|| tls(broker)).transpose()?;
        Ok(Self { password, tls })
    }

    fn transport(&self) -> Transport {
        match &self.tls {
            Some(config) => {
                Transport::tls_with_config(TlsConfiguration::Rustls(Arc::clone(config)))
            }
            None => Transport::Tcp,
        }
    }
}

/// Options for MQTT 5: address, client id, credentials, encryption, keep-alive and packet limit.
pub fn options_v5(broker: &Broker, client_id: &str, secrets: &Secrets) -> rumqttc::v5::MqttOptions {
    let mut options = rumqttc::v5::MqttOptions::new(client_id, host(broker), broker.port);
    options
        .set_keep_alive(keep_alive(broker))
        .set_connection_timeout(CONNECT_TIMEOUT_S)
        .set_max_packet_size(Some(packet_limit(broker)))
        .set_transport(secrets.transport());
    if let Some(user) = &broker.user {
        options.set_credentials(user, secrets.password.as_deref().unwrap_or_default());
    }
    options
}

/// Options for MQTT 3.1.1, the same ones.
pub fn options_v4(broker: &Broker, client_id: &str, secrets: &Secrets) -> rumqttc::MqttOptions {
    let mut options = rumqttc::MqttOptions::new(client_id, host(broker), broker.port);
    let limit = packet_limit(broker) as usize;
    options
        .set_keep_alive(keep_alive(broker))
        .set_max_packet_size(limit, limit)
        .set_transport(secrets.transport());
    if let Some(user) = &broker.user {
        options.set_credentials(user, secrets.password.as_deref().unwrap_or_default());
    }
    options
}

/// The event loop of MQTT 3.1.1 keeps its timeout beside the options.
pub fn network_options_v4() -> rumqttc::NetworkOptions {
    let mut options = rumqttc::NetworkOptions::new();
    options.set_connection_timeout(CONNECT_TIMEOUT_S);
    options
}

/// An IPv6 address stands in brackets where a port follows. (With TLS it must not, and rumqttc has
/// only one place for both: encrypted connections need a name or an IPv4 address.)
fn host(broker: &Broker) -> String {
    if broker.host.contains(':') && !broker.tls {
        format!("[{}]", broker.host)
    } else {
        broker.host.clone()
    }
}

fn keep_alive(broker: &Broker) -> Duration {
    Duration::from_secs(u64::from(broker.keep_alive_s.max(LEAST_KEEP_ALIVE_S)))
}

/// The largest packet that rumqttc lets through: the largest payload with its topic and properties.
/// A larger one ends the connection, and a persistent session would then bring it again for ever, so
/// payloads above `most_bytes` must still come through and be refused one by one.
fn packet_limit(broker: &Broker) -> u32 {
    let payload = u32::try_from(broker.most_bytes).unwrap_or(u32::MAX);
    payload.saturating_mul(16).clamp(16 << 20, 256 << 20)
}

fn read(what: &'static str, file: &Path) -> Result<Vec<u8>, ConnectionFileError> {
    fs::read(file).map_err(|source| ConnectionFileError::Unreadable {
        what,
        file: file.to_owned(),
        source,
    })
}

/// The first line of a file, so that the line end an editor adds is no part of the password.
///
/// # Errors
/// When the file cannot be read.
pub fn password(file: &Path) -> Result<String, ConnectionFileError> {
    let bytes = read("the password file", file)?;
    let text = String::from_utf8_lossy(&bytes);
    Ok(text.lines().next().unwrap_or_default().to_owned())
}

/// Encryption towards a server that needs no certificate of ours.
///
/// # Errors
/// When the authorities cannot be read.
pub fn server_tls(ca_file: Option<&Path>) -> Result<ClientConfig, ConnectionFileError> {
    Ok(trusting(authorities(ca_file)?)?.with_no_client_auth())
}

/// What a client needs that never encrypts: nobody is trusted.
///
/// # Errors
/// When the encryption itself is not as it was built.
pub fn no_tls() -> Result<ClientConfig, ConnectionFileError> {
    Ok(trusting(rustls::RootCertStore::empty())?.with_no_client_auth())
}

fn trusting(
    authorities: rustls::RootCertStore,
) -> Result<rustls::ConfigBuilder<ClientConfig, rustls::client::WantsClientCert>, rustls::Error> {
    let provider = Arc::new(rustls::crypto::ring::default_provider());
    let builder = ClientConfig::builder_with_provider(provider);
    let builder = builder.with_safe_default_protocol_versions()?;
    Ok(builder.with_root_certificates(authorities))
}

fn tls(broker: &Broker) -> Result<Arc<ClientConfig>, ConnectionFileError> {
    let builder = trusting(authorities(broker.ca_file.as_deref())?)?;
    let own = (&broker.client_certificate_file, &broker.client_key_file);
    let config = match own {
        (Some(certificate), Some(key)) => {
            let chain = certificates("the client certificate file", certificate)?;
            builder.with_client_auth_cert(chain, private_key(key)?)?
        }
        _ => builder.with_no_client_auth(),
    };
    Ok(Arc::new(config))
}

fn authorities(file: Option<&Path>) -> Result<rustls::RootCertStore, ConnectionFileError> {
    let mut store = rustls::RootCertStore::empty();
    match file {
        Some(file) => {
            for certificate in authority_certificates(file)? {
                store.add(certificate)?;
            }
        }
        None => {
            // Some of a system's certificates are often of odd forms; those that can be read count.
            store.add_parsable_certificates(rustls_native_certs::load_native_certs().certs);
            if store.is_empty() {
                return Err(ConnectionFileError::NoSystemAuthorities);
            }
        }
    }
    Ok(store)
}

/// The authorities in a file.
///
/// # Errors
/// When the file cannot be read or holds none.
pub fn authority_certificates(
    file: &Path,
) -> Result<Vec<CertificateDer<'static>>, ConnectionFileError> {
    certificates("the authorities' file", file)
}

fn certificates(
    what: &'static str,
    file: &Path,
) -> Result<Vec<CertificateDer<'static>>, ConnectionFileError> {
    let bytes = read(what, file)?;
    let found: Result<Vec<_>, _> = CertificateDer::pem_slice_iter(&bytes).collect();
    match found {
        Ok(list) if !list.is_empty() => Ok(list),
        _ => Err(ConnectionFileError::Nothing {
            what,
            file: file.to_owned(),
            wanted: "certificate",
        }),
    }
}

fn private_key(file: &Path) -> Result<PrivateKeyDer<'static>, ConnectionFileError> {
    let what = "the client key file";
    let bytes = read(what, file)?;
    PrivateKeyDer::from_pem_slice(&bytes).map_err(|_| ConnectionFileError::Nothing {
        what,
        file: file.to_owned(),
        wanted: "private key",
    })
}

/// The wait between two attempts: doubled each time up to a limit, and spread at random over its
/// upper half so that many clients of a broker that comes back do not all call at once.
#[derive(Clone, Debug, Default)]
pub struct Backoff {
    failures: u32,
}

impl Backoff {
    /// The first wait is at most this.
    const FIRST: Duration = Duration::from_millis(500);
    /// No wait is longer: a broker that comes back is seen within half a minute.
    const LONGEST: Duration = Duration::from_secs(30);

    /// How long to wait after a connection that stood for `stood` (zero when it was never made). Only
    /// one that stood longer than the longest wait starts over: a broker that accepts and throws out
    /// at once, as with two clients of one id, must not be called twice a second for ever.
    pub fn wait_after(&mut self, stood: Duration) -> Duration {
        if stood > Self::LONGEST {
            self.failures = 0;
        }
        let doublings = self.failures.min(16);
        self.failures = self.failures.saturating_add(1);
        let whole = Self::FIRST
            .saturating_mul(1 << doublings)
            .min(Self::LONGEST);
        whole.mul_f64(0.5 + 0.5 * fastrand::f64())
    }
}

#[cfg(test)]
mod tests;
