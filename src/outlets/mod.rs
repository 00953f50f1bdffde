//! Notices on their way out.
//!
//! An outlet takes deliveries, sends them, and reports each one that the other side has confirmed;
//! what is not confirmed it sends again, so a receiver may see a repeat and never misses one. The
//! order of one notice's deliveries is kept. Owns the form of what leaves (CloudEvents 1.0) and the
//! topics. Deliberately absent: deciding what is sent, and keeping it over a restart; the engine
//! does the one and the store the other.

mod cloud_event;
pub mod mqtt;
mod queue;
mod topic;

/// What an outlet tells the house about a delivery.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Report {
    /// The other side has confirmed it.
    Delivered(u64),
    /// It could not be sent; the outlet keeps it and tries again. Told once for each reason.
    NotDelivered {
        /// [`crate::notice::Delivery::number`].
        number: u64,
        /// Why, for people.
        why: String,
    },
}

/// Why an outlet stopped before it was asked to.
#[derive(Clone, Copy, Debug, PartialEq, Eq, thiserror::Error)]
pub enum OutletError {
    /// Nobody takes the reports any more, so nothing could be taken off the list of what is owed.
    #[error("nobody takes the reports of the outlet for notices")]
    ReportsClosed,
}
