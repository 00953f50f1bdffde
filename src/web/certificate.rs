//! Our certificate: read from its files into what encrypts connections.
//!
//! Deliberately absent: renewing it. The files are read at the start; a new certificate needs another.

use std::path::{Path, PathBuf};
use std::sync::Arc;

use rustls::ServerConfig;
use rustls::pki_types::pem::PemObject as _;
use rustls::pki_types::{CertificateDer, PrivateKeyDer};

use crate::settings::WebSettings;

/// Why the certificate cannot be used.
#[derive(Debug, thiserror::Error)]
pub enum CertificateError {
    /// The certificate's file is no PEM file with a certificate.
    #[error("the certificate file {} holds no certificate that can be read: {why}", file.display())]
    Certificate {
        /// The file.
        file: PathBuf,
        /// What is wrong with it.
        why: String,
    },
    /// The key's file is no PEM file with a key.
    #[error("the key file {} holds no key that can be read: {why}", file.display())]
    Key {
        /// The file.
        file: PathBuf,
        /// What is wrong with it.
        why: String,
    },
    /// They do not go together, or the key is of a kind that is not known.
    #[error("the certificate in {} and the key in {} do not go together: {why}", certificate.display(), key.display())]
    Pair {
        /// The certificate's file.
        certificate: PathBuf,
        /// The key's file.
        key: PathBuf,
        /// What is wrong with them.
        why: rustls::Error,
    },
}

/// What encrypts connections, when files are given.
///
/// # Errors
/// [`CertificateError`] says which file is wrong.
pub fn read(settings: &WebSettings) -> Result<Option<Arc<ServerConfig>>, CertificateError> {
    let (Some(certificate), Some(key)) = (&settings.certificate_file, &settings.key_file) else {
        return Ok(None);
    };
    config(certificate, key).map(|config| Some(Arc::new(config)))
}

fn config(certificate: &Path, key: &Path) -> Result<ServerConfig, CertificateError> {
    let wrong = |why: String| CertificateError::Certificate {
        file: certificate.to_owned(),
        why,
    };
    let chain = CertificateDer::pem_file_iter(certificate)
        .and_then(|all| all.collect::<Result<Vec<_>, _>>())
        .map_err(|e| wrong(e.to_string()))?;
    if chain.is_empty() {
        return Err(wrong("it is empty of certificates".to_owned()));
    }
    let own = PrivateKeyDer::from_pem_file(key).map_err(|e| CertificateError::Key {
        file: key.to_owned(),
        why: e.to_string(),
    })?;
    let pair = |why: rustls::Error| CertificateError::Pair {
        certificate: certificate.to_owned(),
        key: key.to_owned(),
        why,
    };
    let provider = Arc::new(rustls::crypto::ring::default_provider());
    let builder = ServerConfig::builder_with_provider(provider)
        .with_safe_default_protocol_versions()
        .map_err(pair)?;
    let mut config = builder
        .with_no_client_auth()
        .with_single_cert(chain, own)
        .map_err(pair)?;
    config.alpn_protocols = vec![b"http/1.1".to_vec()];
    Ok(config)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn faults_name_the_file() {
        let folder = tempfile::tempdir().expect("a folder");
        let file = |name: &str, text: &str| {
            let path = folder.path().join(name);
            std::fs::write(&path, text).expect("written");
            path
        };
        let pair = |name: &str| {
            let made = rcgen::generate_simple_self_signed(vec![name.to_owned()]).expect("made");
            (made.cert.pem(), made.signing_key.serialize_pem())
        };
        let ((one, one_key), (_, other_key)) = (pair("one.example"), pair("two.example"));
        let (one, one_key) = (file("one.pem", &one), file("one.key", &one_key));
        let (empty, other_key) = (file("empty.pem", "\n"), file("two.key", &other_key));
        let missing = folder.path().join("none.pem");
        for (certificate, key, words) in [
            (&one, &one_key, ""),
            (&missing, &one_key, "none.pem holds no certificate"),
            (&empty, &one_key, "empty.pem holds no certificate"),
            (&one, &empty, "empty.pem holds no key"),
            (&one, &other_key, "do not go together"),
        ] {
            let said = config(certificate, key).map_or_else(|e| e.to_string(), |_| String::new());
            assert!(
                said.contains(words) && said.is_empty() == words.is_empty(),
                "{said}"
            );
        }
    }
}
