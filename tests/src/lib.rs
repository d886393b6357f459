//! Everything that crosses crates.

pub mod compare;
