//! The layout of the keys: one ordered space, a first byte for each sort of record.
//!
//! Numbers are big-endian, times with the sign bit flipped, names preceded by their length, so that
//! the order of bytes is the order of things and no name can reach into another's range.
//! Everything lies in one tree because only then a batch is applied whole or not at all.

use crate::model::Time;

/// Facts about the database itself.
const FACT: u8 = b'a';
const UNACKNOWLEDGED: &[u8] = b"aunacknowledged";
/// What a bank can rely on although it has no checkpoint yet.
const JOINED: u8 = b'b';
const CHECKPOINT: u8 = b'c';
const DIGEST: u8 = b'd';
const EVIDENCE: u8 = b'e';
const TURN: u8 = b'j';
/// Line events of a bank.
const LINE: u8 = b'k';
const LOOK: u8 = b'l';
const NOTICE: u8 = b'n';
const DELIVERY: u8 = b'o';
/// Notices in the order in which they were raised.
const RAISED: u8 = b't';
/// Parts of long records.
const PART: u8 = b'x';

/// The sorts of records that are read as whole ranges.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Sort {
    Checkpoint,
    Digest,
    Turn,
    Line,
    Look,
    Delivery,
    Raised,
}

impl Sort {
    const fn byte(self) -> u8 {
        match self {
            Self::Checkpoint => CHECKPOINT,
            Self::Digest => DIGEST,
            Self::Turn => TURN,
            Self::Line => LINE,
            Self::Look => LOOK,
            Self::Delivery => DELIVERY,
            Self::Raised => RAISED,
        }
    }

    /// Where keys of this sort begin.
    pub(super) fn from(self) -> Vec<u8> {
        vec![self.byte()]
    }

    /// Before where they end.
    pub(super) fn to(self) -> Vec<u8> {
        vec![self.byte() + 1]
    }
}

/// The first key of all, and one beyond the last.
pub(super) const EVERYTHING: (&[u8], &[u8]) = (&[], &[u8::MAX]);

/// The version of the layout.
pub(super) fn format() -> Vec<u8> {
    [&[FACT][..], b"format"].concat()
}

/// How many commits the database holds.
pub(super) fn commits() -> Vec<u8> {
    [&[FACT][..], b"commits"].concat()
}

/// A piece of the list of messages that are durable and not yet acknowledged.
pub(super) fn unacknowledged(piece: u32) -> Vec<u8> {
    [UNACKNOWLEDGED, &piece.to_be_bytes()].concat()
}

/// Where the pieces of [`unacknowledged`] begin and end.
pub(super) fn unacknowledged_range() -> (Vec<u8>, Vec<u8>) {
    (UNACKNOWLEDGED.to_vec(), beyond(UNACKNOWLEDGED))
}

pub(super) fn joined(bank: &str) -> Vec<u8> {
    [&[JOINED], bank.as_bytes()].concat()
}

pub(super) fn checkpoint(bank: &str) -> Vec<u8> {
    [&[CHECKPOINT], bank.as_bytes()].concat()
}

/// The bank's name in a key of [`joined`] or [`checkpoint`].
pub(super) fn bank_of(key: &[u8]) -> Option<&str> {
    std::str::from_utf8(key.get(1..)?).ok()
}

pub(super) fn turn(number: u64) -> Vec<u8> {
    numbered(TURN, number)
}

pub(super) fn delivery(number: u64) -> Vec<u8> {
    numbered(DELIVERY, number)
}

fn numbered(sort: u8, number: u64) -> Vec<u8> {
    [&[sort][..], &number.to_be_bytes()].concat()
}

/// The number in a key of [`turn`] or [`delivery`], or the serial in one of [`part`].
pub(super) fn number_of(key: &[u8]) -> Option<u64> {
    let bytes = key.get(1..9)?;
    Some(u64::from_be_bytes(bytes.try_into().ok()?))
}

/// Where a bank's records of this sort begin.
pub(super) fn of_bank(sort: Sort, bank: &str) -> Vec<u8> {
    let length = u32::try_from(bank.len()).unwrap_or(u32::MAX);
    [&[sort.byte()], &length.to_be_bytes()[..], bank.as_bytes()].concat()
}

/// The part of a key of [`digest`] or [`look`] that [`of_bank`] made.
pub(super) fn bank_prefix(key: &[u8]) -> Option<&[u8]> {
    let length = u32::from_be_bytes(key.get(1..5)?.try_into().ok()?);
    key.get(..5 + usize::try_from(length).ok()?)
}

/// Beyond every key that begins with `prefix` and goes on with a time or a span.
pub(super) fn beyond(prefix: &[u8]) -> Vec<u8> {
    [prefix, &[u8::MAX; 16]].concat()
}

/// Where a bank's digests or line events from `at` on begin.
pub(super) fn times_from(bank_prefix: &[u8], at: Time) -> Vec<u8> {
    [bank_prefix, &time(at)].concat()
}

pub(super) fn digest(bank: &str, at: Time, span: usize) -> Vec<u8> {
    let prefix = of_bank(Sort::Digest, bank);
    [&times_from(&prefix, at)[..], &length(span)].concat()
}

/// A line event of a bank; the turn tells those of one moment apart.
pub(super) fn line_event(bank: &str, at: Time, turn: u64) -> Vec<u8> {
    let prefix = of_bank(Sort::Line, bank);
    [&times_from(&prefix, at)[..], &turn.to_be_bytes()].concat()
}

/// The span in a key of [`digest`].
pub(super) fn digest_span_of(key: &[u8]) -> Option<usize> {
    let bytes = key.get(key.len().checked_sub(4)?..)?;
    usize::try_from(u32::from_be_bytes(bytes.try_into().ok()?)).ok()
}

/// Where a bank's looks over `span` from `at` on begin.
pub(super) fn looks_from(bank_prefix: &[u8], span: u32, at: Time) -> Vec<u8> {
    [bank_prefix, &span.to_be_bytes()[..], &time(at)].concat()
}

pub(super) fn look(bank: &str, span: usize, at: Time) -> Vec<u8> {
    let prefix = of_bank(Sort::Look, bank);
    [&prefix[..], &length(span), &time(at)].concat()
}

/// The span in a key of [`look`].
pub(super) fn span_of(key: &[u8]) -> Option<u32> {
    let at = bank_prefix(key)?.len();
    Some(u32::from_be_bytes(key.get(at..at + 4)?.try_into().ok()?))
}

pub(super) fn notice(id: &str) -> Vec<u8> {
    [&[NOTICE], id.as_bytes()].concat()
}

pub(super) fn evidence(id: &str) -> Vec<u8> {
    [&[EVIDENCE], id.as_bytes()].concat()
}

pub(super) fn raised(at: Time, id: &str) -> Vec<u8> {
    [&[RAISED], &time(at)[..], id.as_bytes()].concat()
}

/// The notice's id in a key of [`raised`].
pub(super) fn id_of(key: &[u8]) -> Option<&str> {
    std::str::from_utf8(key.get(9..)?).ok()
}

pub(super) fn part(serial: u64, part: u32) -> Vec<u8> {
    [&[PART], &serial.to_be_bytes()[..], &part.to_be_bytes()[..]].concat()
}

/// Times before 1970 sort before those after it.
fn time(at: Time) -> [u8; 8] {
    (at.us().cast_unsigned() ^ (1 << 63)).to_be_bytes()
}

fn length(span: usize) -> [u8; 4] {
    u32::try_from(span).unwrap_or(u32::MAX).to_be_bytes()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_order_of_keys_is_the_order_of_things() {
        let t = Time::from_us;
        let rising = [
            digest("a", t(-5), 10),
            digest("a", t(0), 10),
            digest("a", t(0), 40),
            digest("a", t(7), 10),
            digest("b", t(-9), 10),
            digest("aa", t(-9), 10),
            turn(1),
            turn(255),
            turn(256),
            look("a", 10, t(3)),
            look("a", 10, t(4)),
            look("a", 40, t(1)),
            raised(t(-1), "z"),
            raised(t(1), "a"),
        ];
        for pair in rising.windows(2) {
            assert!(pair[0] < pair[1], "{pair:?}");
        }
    }

    #[test]
    fn what_a_key_was_made_of_can_be_read_back() {
        assert_eq!(number_of(&turn(77)), Some(77));
        assert_eq!(number_of(&part(78, 3)), Some(78));
        assert_eq!(bank_of(&checkpoint("filler-2")), Some("filler-2"));
        assert_eq!(id_of(&raised(Time::from_us(5), "f-7")), Some("f-7"));
        let key = look("filler-2", 160, Time::from_us(5));
        assert_eq!(span_of(&key), Some(160));
        assert_eq!(
            bank_prefix(&key),
            Some(&of_bank(Sort::Look, "filler-2")[..])
        );
        for short in [&[][..], b"l", b"l\0\0\0", b"l\0\0\0\x09abc"] {
            assert_eq!(span_of(short), None, "{short:?}");
        }
    }
}
