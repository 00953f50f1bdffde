//! Health.

use serde::Serialize;
use utoipa::ToSchema;

use crate::engine::{Condition, OutletView, Snapshot};

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
    /// The ways out, the broker first.
    pub outlets: Vec<OutletBody>,
    /// The version of evenrow.
    pub version: String,
}

/// A way out of a notice.
#[derive(Debug, Serialize, ToSchema)]
pub struct OutletBody {
    /// Its name.
    pub name: String,
    /// Deliveries not yet confirmed.
    pub waiting: usize,
    /// What it last complained of; `null` when its last delivery was confirmed.
    pub trouble: Option<String>,
    /// Deliveries confirmed since the process started.
    pub delivered: u64,
    /// Failures since the process started; what failed is kept and sent again.
    pub failed: u64,
}

impl From<&OutletView> for OutletBody {
    fn from(view: &OutletView) -> Self {
        let OutletView {
            name,
            waiting,
            trouble,
            delivered,
            failed,
        } = view;
        Self {
            name: name.to_string(),
            waiting: *waiting,
            trouble: trouble.clone(),
            delivered: *delivered,
            failed: *failed,
        }
    }
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
            outlets: snapshot.outlets.iter().map(Into::into).collect(),
            version: env!("CARGO_PKG_VERSION").to_owned(),
        }
    }
}
