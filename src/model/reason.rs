//! Why something that arrived did not become a measurement in a window.

use serde::{Deserialize, Serialize};

use super::{BankIx, Name};

/// The reasons, one word each; the word is the `outcome` label of the metric and the key of the
/// interface.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Reason {
    /// The payload has no bytes.
    Empty,
    /// The payload is larger than the limit.
    TooLarge,
    /// The payload is no text, or no document of the configured form.
    Malformed,
    /// A configured pointer leads nowhere in the payload.
    FieldMissing,
    /// The value is no number (a number written as text included).
    NotANumber,
    /// NaN or infinite, or beyond what a double holds.
    NotFinite,
    /// The time cannot be read.
    BadTime,
    /// The cycle cannot be read as a whole number.
    BadCycle,
    /// The bank pairs by cycle and the payload carries none.
    NoCycle,
    /// The source is not one of those listed.
    UnknownSource,
    /// One more discovered source than `most_sources` allows.
    TooManySources,
    /// The topic matches no bank.
    NoBank,
    /// A retained message: what was published once is not a fresh measurement.
    Retained,
    /// Delivered again after a restart although it was already durable.
    Redelivered,
    /// Arrived with QoS 0 faster than it could be kept.
    Overflow,
    /// Equal to an earlier value of its source in time and cycle.
    Double,
    /// Taken longer ago than `oldest_days`.
    TooOld,
    /// Taken more than five minutes ahead of now.
    TooFarAhead,
    /// Taken while the line stands.
    LineStopped,
    // Kept records name a reason by its place, so new ones come last.
    /// One of the `sentinels`: the instrument's word for having no value.
    Sentinel,
    /// Outside `plausible`: no value of this characteristic can lie there.
    Implausible,
    /// The unit in the payload is not the bank's.
    WrongUnit,
    /// The sender itself says that the value is not good.
    BadQuality,
    /// Sent without a birth before it, so it cannot be said what it means (Sparkplug).
    Unborn,
    /// Sent after its place in the sequence had been given up (Sparkplug).
    OutOfSequence,
    /// Taken outside all shifts, where the shifts are what is compared.
    OutsideShifts,
}

impl Reason {
    /// Every reason, in the order pages show them.
    pub const ALL: [Self; 26] = [
        Self::Empty,
        Self::TooLarge,
        Self::Malformed,
        Self::FieldMissing,
        Self::NotANumber,
        Self::NotFinite,
        Self::BadTime,
        Self::BadCycle,
        Self::NoCycle,
        Self::UnknownSource,
        Self::TooManySources,
        Self::NoBank,
        Self::Retained,
        Self::Redelivered,
        Self::Overflow,
        Self::Double,
        Self::TooOld,
        Self::TooFarAhead,
        Self::LineStopped,
        Self::Sentinel,
        Self::Implausible,
        Self::WrongUnit,
        Self::BadQuality,
        Self::Unborn,
        Self::OutOfSequence,
        Self::OutsideShifts,
    ];

    /// The one word used in metrics and the interface.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Empty => "empty",
            Self::TooLarge => "too_large",
            Self::Malformed => "malformed",
            Self::FieldMissing => "field_missing",
            Self::NotANumber => "not_a_number",
            Self::NotFinite => "not_finite",
            Self::BadTime => "bad_time",
            Self::BadCycle => "bad_cycle",
            Self::NoCycle => "no_cycle",
            Self::UnknownSource => "unknown_source",
            Self::TooManySources => "too_many_sources",
            Self::NoBank => "no_bank",
            Self::Retained => "retained",
            Self::Redelivered => "redelivered",
            Self::Overflow => "overflow",
            Self::Double => "double",
            Self::TooOld => "too_old",
            Self::TooFarAhead => "too_far_ahead",
            Self::LineStopped => "line_stopped",
            Self::Sentinel => "sentinel",
            Self::Implausible => "implausible",
            Self::WrongUnit => "wrong_unit",
            Self::BadQuality => "bad_quality",
            Self::Unborn => "unborn",
            Self::OutOfSequence => "out_of_sequence",
            Self::OutsideShifts => "outside_shifts",
        }
    }
}

/// One refused arrival, as people are shown it.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Refusal {
    /// The bank it was meant for; `None` when the topic matches none.
    pub bank: Option<BankIx>,
    /// Why.
    pub reason: Reason,
    /// The topic it came on (or the recording's name and line).
    pub topic: Name,
    /// What exactly was wrong, in a sentence without a full stop.
    pub detail: String,
    /// The start of the payload, made printable, at most 120 characters.
    pub excerpt: String,
}
