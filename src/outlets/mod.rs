//! Notices on their way out.
