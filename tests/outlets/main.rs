//! The outlets against real peers: a real Mosquitto, a web server, a mail server, programs. Confirmed
//! means confirmed, whatever the other side does meanwhile.

#[path = "../common/mod.rs"]
mod common;

mod command;
mod mail;
mod mqtt;
mod parts;
mod receiver;
mod webhook;
