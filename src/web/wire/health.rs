//! Health.

use serde::Serialize;
use utoipa::ToSchema;

use crate::engine::{Condition, Snapshot};

/// How the parts are that evenrow needs.
#[derive(Debug, Serialize, ToSchema)]
pub struct HealthBody {
    /// Whether the store is recovered and every subscription confirmed.
    pub ready: bool,
    /// Why not; empty when ready.
    pub trouble: String,
    /// The store: `well`, `starting`, `noted` or `trouble`.
    pub store: String,
    /// The broker, in the same words.
    pub broker: String,
    /// Notices whose delivery is not confirmed yet.
    pub outbox: usize,
    /// What the outlets last complained of.
    pub outbox_trouble: Option<String>,
    /// The version of evenrow.
    pub version: String,
}

impl HealthBody {
    /// Of the present; `trouble` is what keeps it from being ready.
    pub fn new(snapshot: &Snapshot, trouble: Option<String>) -> Self {
        let word = |condition: &Condition| {
            match condition {
                Condition::Well => "well",
                Condition::Starting => "starting",
                Condition::Noted(_) => "noted",
                Condition::Trouble(_) => "trouble",
            }
            .to_owned()
        };
        Self {
            ready: trouble.is_none(),
            trouble: trouble.unwrap_or_default(),
            store: word(&snapshot.store),
            broker: word(&snapshot.broker),
            outbox: snapshot.outbox,
            outbox_trouble: snapshot.outbox_trouble.clone(),
            version: env!("CARGO_PKG_VERSION").to_owned(),
        }
    }
}
