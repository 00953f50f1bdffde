//! Windows -> look -> finding: are the sources alike, which left the even set, since when, by how
//! much, and is there evidence that they came back.
//!
//! Pure: no clock, no randomness, no input or output. Statistics come from [`crate::stats`]; this
//! room decides what they mean for a bank.

mod look;

pub use look::{Dependence, Digest, Estimate, Finding, Look, Method, SourceLook, TestEntry};
