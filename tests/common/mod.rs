//! What several tests share: processes that end with their test, and a real broker.

#![allow(dead_code, reason = "each test uses the part that it needs")]

pub mod certificates;
pub mod desk;
pub mod mosquitto;
pub mod running;
