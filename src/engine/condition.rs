//! Whether the parts that the engine depends on work.

use serde::{Deserialize, Serialize};

/// Parts whose condition is shown.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Part {
    /// The connection to the broker that measurements come from.
    Broker,
    /// The embedded store.
    Store,
}

/// How a part is.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Condition {
    /// Not known yet.
    Starting,
    /// It works.
    Well,
    /// It does not; what is wrong and what to do, for people.
    Trouble(String),
    /// It works, after something that people should know of.
    Noted(String),
}
