//! Everything that crosses crates.

pub mod client;
pub mod command;
pub mod compare;
