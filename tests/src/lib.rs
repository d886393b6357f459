//! Everything that crosses crates.

pub mod client;
