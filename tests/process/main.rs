//! The real program against a real broker: what a plant would see.
//!
//! Each test starts its own Mosquitto and its own daemon on free ports of the loopback address, in
//! folders that vanish afterwards, and ends exactly the processes that it started. A line of the
//! daemon's log that warns or complains, and that the test did not announce, fails the test.

#[path = "../common/mod.rs"]
mod common;

mod browser;
mod daemon;
mod disk;
mod encrypted;
mod everypage;
mod http;
mod line;
mod outlet;
mod page;
mod rubbish;
mod scraped;
mod story;
mod trouble;
