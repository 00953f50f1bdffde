//! The form in which a bank's state is kept, and why a kept one cannot be gone on from.

use crate::model::Time;

use super::Record;
use super::bank::{State, Watched};
use super::send::Told;

/// Version of the encoded state.
const STATE_VERSION: u8 = 4;

/// Why a checkpoint cannot be gone on from.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum RestoreError {
    /// No bank of this name is configured.
    #[error("bank \"{0}\" is no longer configured; what was kept of it is left alone")]
    NoSuchBank(String),
    /// Written by another version.
    #[error(
        "the state of bank \"{bank}\" was written in form {version}, this program reads form {STATE_VERSION}"
    )]
    OtherVersion {
        /// The bank.
        bank: String,
        /// The form found.
        version: u8,
    },
    /// It cannot be decoded.
    #[error("the state of bank \"{0}\" cannot be decoded")]
    Unreadable(String),
    /// Values kept under another pairing do not fit.
    #[error("the pairing of bank \"{0}\" was changed, so its windows start afresh")]
    PairingChanged(String),
}

/// Reads what [`checkpoint`] wrote.
pub fn decode(bank: &str, state: &[u8]) -> Result<(State, Told), RestoreError> {
    let unreadable = || RestoreError::Unreadable(bank.to_owned());
    let (&version, encoded) = state.split_first().ok_or_else(unreadable)?;
    if version != STATE_VERSION {
        return Err(RestoreError::OtherVersion {
            bank: bank.to_owned(),
            version,
        });
    }
    postcard::from_bytes(encoded).map_err(|_| unreadable())
}

/// A bank's whole state. `last` is the last turn that was applied: whatever in it was not for this bank is contained too,
/// so that a bank that stands idle does not hold the whole journal back.
pub fn checkpoint(bank: &mut Watched, told: &Told, last: u64, now: Time) -> Record {
    bank.state.turn = bank.state.turn.max(last);
    bank.unsaved = false;
    bank.last_checkpoint = Some(now);
    let mut state = vec![STATE_VERSION];
    // Encoding plain data into memory cannot fail.
    state.extend(postcard::to_allocvec(&(&bank.state, told)).unwrap_or_default());
    Record::Checkpoint {
        bank: bank.bank.name.clone(),
        turn: bank.state.turn,
        state,
    }
}
