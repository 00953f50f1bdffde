//! Line events: what people or machines did to the line, as far as it changes what values mean.

use serde::{Deserialize, Serialize};

use super::{Name, Time, Value};

/// What happened on the line.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub enum LineChange {
    /// Another product: older values no longer count, and what was learnt for it is taken up again.
    Changeover {
        /// The product's code.
        product: Name,
        /// What every source should give now, where that changes.
        target: Option<Value>,
        /// The declared quantity, where that changes.
        declared: Option<Value>,
    },
    /// A source was adjusted: its older values no longer count.
    Adjustment {
        /// The source.
        source: Name,
        /// By how much, in the unit, where it is known.
        by: Option<f64>,
    },
    /// The line stopped: what arrives until it starts is not judged.
    Stop,
    /// The line runs again.
    Start,
    /// A source is out of use (a capped head, a blocked cavity): nobody waits for it or compares it.
    OutOfUse {
        /// The source.
        source: Name,
    },
    /// It is in use again; its older values no longer count.
    BackInUse {
        /// The source.
        source: Name,
    },
}

impl LineChange {
    /// The word in interfaces.
    pub const fn word(&self) -> &'static str {
        match self {
            Self::Changeover { .. } => "changeover",
            Self::Adjustment { .. } => "adjustment",
            Self::Stop => "stop",
            Self::Start => "start",
            Self::OutOfUse { .. } => "out_of_use",
            Self::BackInUse { .. } => "back_in_use",
        }
    }

    /// The words for people.
    pub const fn words(&self) -> &'static str {
        match self {
            Self::Changeover { .. } => "changeover",
            Self::Adjustment { .. } => "adjustment",
            Self::Stop => "stop",
            Self::Start => "start",
            Self::OutOfUse { .. } => "out of use",
            Self::BackInUse { .. } => "back in use",
        }
    }

    /// The source that it is about, if it is about one.
    pub const fn source(&self) -> Option<&Name> {
        match self {
            Self::Adjustment { source, .. }
            | Self::OutOfUse { source }
            | Self::BackInUse { source } => Some(source),
            Self::Changeover { .. } | Self::Stop | Self::Start => None,
        }
    }
}

/// A line event as it is kept.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct LineEvent {
    /// When it was entered.
    pub at: Time,
    /// Who entered it.
    pub by: Name,
    /// What happened.
    pub change: LineChange,
    /// The reason as given; may be empty.
    pub reason: String,
}
