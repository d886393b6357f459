//! A cell's way from its text to its output.

pub mod types;
