//! The one binary of Semiaxis: what clients start, and what a person types on the command line.

mod cells;
mod help;
mod notebook;
mod session;
mod setup;
mod wire;
mod worker;

fn main() {}
