//! Records as bytes: `version, form, payload, CRC-32`, the checksum over the key as well.
//!
//! A record longer than [`LONGEST`] is kept as parts, and a head in its place says which: the
//! database writes values beyond an eighth of a mebibyte into files of their own that it does not sync.
//! Payloads are postcard, but for turns of measurements, which [`super::pack`] packs.

use serde::Serialize;
use serde::de::DeserializeOwned;

/// The version of frames and payloads.
const VERSION: u8 = 1;
/// The payload follows.
const WHOLE: u8 = 0;
/// A [`Head`] follows.
const HEAD: u8 = 1;
/// A piece of a long payload follows.
const PART: u8 = 2;

/// Longest payload kept in one value, in bytes. A page of the database holds up to 17 values and must
/// stay below 128 KiB.
pub(super) const LONGEST: usize = 6 * 1024;

/// Why bytes are no record.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub(super) enum DecodeError {
    #[error("it is cut short")]
    Short,
    #[error("its checksum does not fit")]
    Checksum,
    #[error("it has version {0}, and this program reads {VERSION}")]
    Version(u8),
    #[error("its form {0} is unknown")]
    Form(u8),
    #[error("its content does not fit: {0}")]
    Content(String),
    #[error("a part of it is missing")]
    PartMissing,
}

/// Stands in the place of a long record.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, serde::Deserialize)]
pub(super) struct Head {
    /// Names its parts; never used twice.
    pub(super) serial: u64,
    /// How many parts there are.
    pub(super) parts: u32,
}

/// What a value holds.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Framed<'a> {
    /// A whole payload.
    Whole(&'a [u8]),
    /// The payload lies in parts.
    Head(Head),
    /// A part.
    Part(&'a [u8]),
}

fn frame(key: &[u8], form: u8, payload: &[u8]) -> Vec<u8> {
    let mut bytes = Vec::with_capacity(payload.len() + 6);
    bytes.extend_from_slice(&[VERSION, form]);
    bytes.extend_from_slice(payload);
    bytes.extend_from_slice(&checksum(key, &bytes).to_le_bytes());
    bytes
}

fn checksum(key: &[u8], bytes: &[u8]) -> u32 {
    let mut sum = crc32fast::Hasher::new();
    sum.update(key);
    sum.update(bytes);
    sum.finalize()
}

pub(super) fn whole(key: &[u8], payload: &[u8]) -> Vec<u8> {
    frame(key, WHOLE, payload)
}

pub(super) fn part(key: &[u8], payload: &[u8]) -> Vec<u8> {
    frame(key, PART, payload)
}

pub(super) fn head(key: &[u8], head: Head) -> Vec<u8> {
    let numbers = [&head.serial.to_le_bytes()[..], &head.parts.to_le_bytes()].concat();
    frame(key, HEAD, &numbers)
}

/// Takes a value out of its frame.
///
/// # Errors
/// When the value is not what was written under this key.
pub(super) fn unframe<'a>(key: &[u8], value: &'a [u8]) -> Result<Framed<'a>, DecodeError> {
    let (rest, sum) = value.split_last_chunk::<4>().ok_or(DecodeError::Short)?;
    if checksum(key, rest) != u32::from_le_bytes(*sum) {
        return Err(DecodeError::Checksum);
    }
    let [version, form, payload @ ..] = rest else {
        return Err(DecodeError::Short);
    };
    if *version != VERSION {
        return Err(DecodeError::Version(*version));
    }
    match *form {
        WHOLE => Ok(Framed::Whole(payload)),
        PART => Ok(Framed::Part(payload)),
        HEAD => {
            let (serial, parts) = payload.split_first_chunk::<8>().ok_or(DecodeError::Short)?;
            let parts = parts.first_chunk::<4>().ok_or(DecodeError::Short)?;
            Ok(Framed::Head(Head {
                serial: u64::from_le_bytes(*serial),
                parts: u32::from_le_bytes(*parts),
            }))
        }
        other => Err(DecodeError::Form(other)),
    }
}

/// A plain record as a payload.
///
/// # Errors
/// When it cannot be written in this form.
pub(super) fn to_payload<T: Serialize>(record: &T) -> Result<Vec<u8>, DecodeError> {
    postcard::to_stdvec(record).map_err(|e| DecodeError::Content(e.to_string()))
}

/// The plain record in a payload.
///
/// # Errors
/// When the payload holds something else.
pub(super) fn from_payload<T: DeserializeOwned>(payload: &[u8]) -> Result<T, DecodeError> {
    postcard::from_bytes(payload).map_err(|e| DecodeError::Content(e.to_string()))
}

/// The plain record at the start of a payload, and what follows it.
///
/// # Errors
/// When the payload begins with something else.
pub(super) fn take_payload<T: DeserializeOwned>(payload: &[u8]) -> Result<(T, &[u8]), DecodeError> {
    postcard::take_from_bytes(payload).map_err(|e| DecodeError::Content(e.to_string()))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_frame_gives_back_what_was_put_in() {
        let key = b"key";
        assert_eq!(unframe(key, &whole(key, b"abc")), Ok(Framed::Whole(b"abc")));
        assert_eq!(unframe(key, &whole(key, b"")), Ok(Framed::Whole(b"")));
        assert_eq!(unframe(key, &part(key, b"abc")), Ok(Framed::Part(b"abc")));
        let long = Head {
            serial: 7,
            parts: 3,
        };
        assert_eq!(unframe(key, &head(key, long)), Ok(Framed::Head(long)));
    }

    #[test]
    fn every_flipped_bit_and_every_cut_is_found() {
        let good = whole(b"key", b"some payload");
        for bit in 0..good.len() * 8 {
            let mut bad = good.clone();
            bad[bit / 8] ^= 1 << (bit % 8);
            assert!(unframe(b"key", &bad).is_err(), "bit {bit}");
        }
        for length in 0..good.len() {
            assert!(unframe(b"key", &good[..length]).is_err(), "cut at {length}");
        }
        assert_eq!(unframe(b"kez", &good), Err(DecodeError::Checksum));
    }

    #[test]
    fn a_newer_version_is_said_to_be_one() {
        let mut bytes = vec![VERSION + 1, WHOLE, 1, 2, 3];
        let sum = checksum(b"key", &bytes);
        bytes.extend_from_slice(&sum.to_le_bytes());
        assert_eq!(
            unframe(b"key", &bytes),
            Err(DecodeError::Version(VERSION + 1))
        );
    }
}
