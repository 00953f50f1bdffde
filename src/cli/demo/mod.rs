//! `evenrow demo`.
pub mod filler;
