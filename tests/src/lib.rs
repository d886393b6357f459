//! Everything that crosses crates.
