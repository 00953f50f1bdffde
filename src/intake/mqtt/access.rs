//! What is needed to be let in: the password and the TLS configuration, read from their files at
//! every attempt to connect, so that renewed ones are used without a restart.

use std::path::Path;
use std::sync::Arc;

use rustls::pki_types::pem::PemObject;
use rustls::pki_types::{CertificateDer, PrivateKeyDer};
use rustls::{ClientConfig, RootCertStore};

use crate::settings::Broker;

/// What is needed to be let in.
pub(super) struct Access {
    /// User and password.
    pub(super) login: Option<(String, String)>,
    /// Set when the connection is encrypted.
    pub(super) tls: Option<Arc<ClientConfig>>,
}

/// Why one of the files cannot be used.
#[derive(Debug, thiserror::Error)]
pub(super) enum AccessError {
    #[error("{what} cannot be read from {file}: {why}")]
    File {
        what: &'static str,
        file: String,
        why: String,
    },
    #[error("{file} holds no certificate; it should be a PEM file")]
    NoCertificate { file: String },
    #[error("the system has no certificates of authorities{why}; set broker.ca_file")]
    NoSystemRoots { why: String },
    #[error("a certificate in {file} cannot be used: {why}")]
    Certificate { file: String, why: rustls::Error },
    #[error("client certificate and key do not belong together or cannot be used: {0}")]
    ClientKey(rustls::Error),
    #[error("broker.client_certificate_file and broker.client_key_file go together")]
    Half,
    #[error("TLS cannot be set up: {0}")]
    Setup(rustls::Error),
}

impl Access {
    /// Reads what the settings name.
    pub(super) fn read(broker: &Broker) -> Result<Self, AccessError> {
        let login = match &broker.user {
            None => None,
            Some(user) => {
                let password = broker.password_file.as_deref().map(password).transpose()?;
                Some((user.clone(), password.unwrap_or_default()))
            }
        };
        let tls = broker.tls.then(|| tls(broker)).transpose()?;
        Ok(Self { login, tls })
    }
}

/// The first line of the file.
fn password(file: &Path) -> Result<String, AccessError> {
    let text =
        std::fs::read_to_string(file).map_err(|why| unreadable("the password", file, &why))?;
    Ok(text.lines().next().unwrap_or_default().to_owned())
}

fn tls(broker: &Broker) -> Result<Arc<ClientConfig>, AccessError> {
    let provider = Arc::new(rustls::crypto::ring::default_provider());
    let builder = ClientConfig::builder_with_provider(provider)
        .with_safe_default_protocol_versions()
        .map_err(AccessError::Setup)?
        .with_root_certificates(roots(broker.ca_file.as_deref())?);
    let (certificates, key) = (
        broker.client_certificate_file.as_deref(),
        broker.client_key_file.as_deref(),
    );
    let config = match (certificates, key) {
        (None, None) => builder.with_no_client_auth(),
        (Some(chain), Some(key)) => {
            let chain = certificates_of(chain)?;
            let key = PrivateKeyDer::from_pem_file(key)
                .map_err(|why| unreadable("the client's key", key, &why))?;
            builder
                .with_client_auth_cert(chain, key)
                .map_err(AccessError::ClientKey)?
        }
        _ => return Err(AccessError::Half),
    };
    Ok(Arc::new(config))
}

/// Whom to trust: the authorities in the file, without one the system's.
fn roots(file: Option<&Path>) -> Result<RootCertStore, AccessError> {
    let mut store = RootCertStore::empty();
    let Some(file) = file else {
        let found = rustls_native_certs::load_native_certs();
        store.add_parsable_certificates(found.certs);
        if store.is_empty() {
            let why = found.errors.first().map(|error| format!(" ({error})"));
            let why = why.unwrap_or_default();
            return Err(AccessError::NoSystemRoots { why });
        }
        return Ok(store);
    };
    for certificate in certificates_of(file)? {
        store
            .add(certificate)
            .map_err(|why| AccessError::Certificate {
                file: file.display().to_string(),
                why,
            })?;
    }
    Ok(store)
}

fn certificates_of(file: &Path) -> Result<Vec<CertificateDer<'static>>, AccessError> {
    let certificates: Result<Vec<_>, _> =
        CertificateDer::pem_file_iter(file).and_then(Iterator::collect);
    let certificates = certificates.map_err(|why| unreadable("a certificate", file, &why))?;
    if certificates.is_empty() {
        let file = file.display().to_string();
        return Err(AccessError::NoCertificate { file });
    }
    Ok(certificates)
}

fn unreadable(what: &'static str, file: &Path, why: &dyn std::fmt::Display) -> AccessError {
    AccessError::File {
        what,
        file: file.display().to_string(),
        why: why.to_string(),
    }
}
