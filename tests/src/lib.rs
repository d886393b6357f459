//! Everything that crosses crates.

pub mod client;
pub mod compare;
