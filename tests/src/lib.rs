//! Everything that crosses crates.

pub mod evaluator;
pub mod place;
pub mod sequences;
