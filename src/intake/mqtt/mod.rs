//! mqtt
