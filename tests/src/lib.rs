//! Everything that crosses crates.

pub mod client;
pub mod execution;
pub mod command;
pub mod compare;
pub mod debian;
pub mod evaluator;
pub mod place;
pub mod python;
pub mod sequences;
