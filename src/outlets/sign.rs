//! Signatures of webhooks by the Standard Webhooks specification
//! (github.com/standard-webhooks/standard-webhooks, `spec/standard-webhooks.md`): HMAC-SHA256 over
//! `id.timestamp.body`, in base64, one for each secret so that secrets can be changed without a gap.

use std::path::Path;

use base64::Engine as _;
use base64::engine::general_purpose::STANDARD;
use hmac::{Hmac, KeyInit, Mac};
use sha2::Sha256;

/// What a secret may begin with.
const PREFIX: &str = "whsec_";

/// Bytes of a secret, by the specification.
const LENGTHS: std::ops::RangeInclusive<usize> = 24..=64;

/// A secret that receivers know too.
#[derive(Clone, PartialEq, Eq)]
pub struct Secret(Vec<u8>);

/// Why the file of secrets cannot be used.
#[derive(Debug, thiserror::Error)]
pub enum SecretError {
    /// It cannot be read.
    #[error("the secret file {file} cannot be read: {source}")]
    Unreadable {
        /// Which.
        file: String,
        /// What the system says.
        source: std::io::Error,
    },
    /// A line is no secret.
    #[error(
        "line {line} of the secret file {file} is no secret: write {PREFIX} and 24 to 64 random \
         bytes in base64"
    )]
    NoSecret {
        /// Which.
        file: String,
        /// From 1.
        line: usize,
    },
    /// There is none in it.
    #[error("the secret file {0} is empty: write {PREFIX} and 24 to 64 random bytes in base64")]
    Empty(String),
}

impl Secret {
    /// A secret as it is written, with or without its prefix.
    pub fn parse(text: &str) -> Option<Self> {
        let text = text.trim();
        let bytes = STANDARD.decode(text.strip_prefix(PREFIX).unwrap_or(text));
        let bytes = bytes.ok().filter(|b| LENGTHS.contains(&b.len()));
        bytes.map(Self)
    }

    fn sign(&self, id: &str, timestamp_s: i64, body: &[u8]) -> Option<String> {
        let mut mac = Hmac::<Sha256>::new_from_slice(&self.0).ok()?;
        mac.update(format!("{id}.{timestamp_s}.").as_bytes());
        mac.update(body);
        Some(format!(
            "v1,{}",
            STANDARD.encode(mac.finalize().into_bytes())
        ))
    }
}

/// Reads the secrets, one a line; empty lines are passed over.
///
/// # Errors
/// When the file cannot be read, holds none, or holds something else.
pub fn secrets(file: &Path) -> Result<Vec<Secret>, SecretError> {
    let name = || file.display().to_string();
    let text = std::fs::read_to_string(file).map_err(|source| SecretError::Unreadable {
        file: name(),
        source,
    })?;
    let lines = text
        .lines()
        .enumerate()
        .filter(|(_, l)| !l.trim().is_empty());
    let all: Result<Vec<Secret>, SecretError> = lines
        .map(|(at, line)| {
            Secret::parse(line).ok_or_else(|| SecretError::NoSecret {
                file: name(),
                line: at + 1,
            })
        })
        .collect();
    match all {
        Ok(all) if all.is_empty() => Err(SecretError::Empty(name())),
        other => other,
    }
}

/// The value of `webhook-signature`: one signature for each secret, in their order.
pub fn signatures(secrets: &[Secret], id: &str, timestamp_s: i64, body: &[u8]) -> String {
    let all = secrets.iter().filter_map(|s| s.sign(id, timestamp_s, body));
    let all: Vec<String> = all.collect();
    all.join(" ")
}

#[cfg(test)]
mod tests {
    use super::*;

    /// From the specification's own test data (`whsec_MfKQ…`, `msg_p5jX…`).
    #[test]
    fn the_published_example_comes_out() {
        let secret = Secret::parse("whsec_MfKQ9r8GKYqrTwjUPD8ILPZIo2LaLaSw").expect("a secret");
        let made = signatures(
            std::slice::from_ref(&secret),
            "msg_p5jXN8AQM9LWM0D4loKWxJek",
            1_614_265_330,
            b"{\"test\": 2432232314}",
        );
        assert_eq!(made, "v1,g0hM9SsE+OTPJTGt/tmIKtSyZlE3uFJELVlNIOLJ1OE=");
        let bare = Secret::parse("MfKQ9r8GKYqrTwjUPD8ILPZIo2LaLaSw");
        assert!(bare == Some(secret));
    }

    #[test]
    fn a_file_of_secrets_is_read_line_by_line() {
        let folder = tempfile::tempdir().expect("a folder");
        let file = folder.path().join("secrets");
        let new = format!("whsec_{}", STANDARD.encode([7; 24]));
        let old = STANDARD.encode([9; 64]);
        for (text, wanted) in [
            (format!("{new}\n\n  {old}\n"), Ok(2)),
            ("\n".to_owned(), Err("is empty")),
            (format!("{new}\nwhsec_short\n"), Err("line 2")),
            (STANDARD.encode([7; 23]), Err("line 1")),
            (STANDARD.encode([7; 65]), Err("line 1")),
        ] {
            std::fs::write(&file, &text).expect("written");
            match (secrets(&file), wanted) {
                (Ok(all), Ok(count)) => {
                    assert_eq!(all.len(), count);
                    let made = signatures(&all, "a", 1, b"b");
                    assert_eq!(made.matches("v1,").count(), count);
                    assert!(made.contains(' '));
                }
                (Err(e), Err(words)) => assert!(e.to_string().contains(words), "{e}"),
                (got, wanted) => panic!("{text:?}: {:?} and not {wanted:?}", got.is_ok()),
            }
        }
        let missing = secrets(&folder.path().join("none"));
        assert!(missing.is_err_and(|e| e.to_string().contains("cannot be read")));
    }
}
