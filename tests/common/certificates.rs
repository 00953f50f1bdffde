//! A private authority with certificates for a broker and a client.

use std::fs;
use std::path::Path;

use rcgen::{
    BasicConstraints, CertificateParams, DnType, ExtendedKeyUsagePurpose, IsCa, Issuer, KeyPair,
    KeyUsagePurpose,
};

/// Writes `ca.pem`, and certificate and key of the broker, made out to `localhost`, and of a client
/// as `broker.pem`, `broker.key`, `client.pem` and `client.key`.
pub fn write(folder: &Path) {
    let write = |name: &str, text: String| {
        fs::write(folder.join(name), text).expect("the file is written");
    };
    let key = KeyPair::generate().expect("a key");
    let mut params = CertificateParams::new(Vec::new()).expect("parameters");
    params
        .distinguished_name
        .push(DnType::CommonName, "Quayside authority");
    params.is_ca = IsCa::Ca(BasicConstraints::Unconstrained);
    params.key_usages = vec![KeyUsagePurpose::KeyCertSign, KeyUsagePurpose::CrlSign];
    let authority = params.self_signed(&key).expect("a certificate");
    write("ca.pem", authority.pem());
    let issuer = Issuer::new(params, key);
    for (name, usage) in [
        ("broker", ExtendedKeyUsagePurpose::ServerAuth),
        ("client", ExtendedKeyUsagePurpose::ClientAuth),
    ] {
        let key = KeyPair::generate().expect("a key");
        let mut params = CertificateParams::new(vec!["localhost".to_owned()]).expect("parameters");
        params.distinguished_name.push(DnType::CommonName, name);
        params.extended_key_usages = vec![usage];
        let certificate = params.signed_by(&key, &issuer).expect("a certificate");
        write(&format!("{name}.pem"), certificate.pem());
        write(&format!("{name}.key"), key.serialize_pem());
    }
}
