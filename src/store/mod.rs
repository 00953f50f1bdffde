//! The embedded store: journal, checkpoints, looks, notices and outbox, and its in-memory twin.
