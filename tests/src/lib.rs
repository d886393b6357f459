//! Everything that crosses crates.

pub mod client;
pub mod command;
pub mod compare;
pub mod debian;
pub mod evaluator;
pub mod execution;
pub mod folder;
pub mod place;
pub mod python;
pub mod sequences;
