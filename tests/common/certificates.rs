//! A private authority with certificates for a broker (made out to `localhost`) and a client.

#![allow(
    dead_code,
    reason = "every test file takes what it needs from this one"
)]

use std::path::Path;

use rcgen::{BasicConstraints, CertificateParams, CertifiedIssuer, DnType, IsCa, KeyPair};

/// Writes `ca.pem`, `broker.pem`, `broker.key`, `client.pem` and `client.key` into the folder.
pub fn write(folder: &Path) {
    let mut params = named("evenrow test authority", &[]);
    params.is_ca = IsCa::Ca(BasicConstraints::Unconstrained);
    let key = KeyPair::generate().expect("a key");
    let authority = CertifiedIssuer::self_signed(params, key).expect("an authority");
    std::fs::write(folder.join("ca.pem"), authority.pem()).expect("ca.pem");
    for (name, names) in [("broker", &["localhost".to_owned()][..]), ("client", &[])] {
        let key = KeyPair::generate().expect("a key");
        let certificate = named(name, names)
            .signed_by(&key, &authority)
            .expect("a certificate");
        let write = |kind: &str, text: String| {
            std::fs::write(folder.join(format!("{name}.{kind}")), text).expect("a file");
        };
        write("pem", certificate.pem());
        write("key", key.serialize_pem());
    }
}

fn named(name: &str, names: &[String]) -> CertificateParams {
    let mut params = CertificateParams::new(names.to_vec()).expect("parameters");
    params.distinguished_name.push(DnType::CommonName, name);
    params
}
