//! The names that every cell can use without a `use` line.
