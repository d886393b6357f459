//! A cell's way from its text to its output.
//!
//! Read in this order: `header` takes the front matter off, `parse` takes the Rust apart, `account`
//! is what the session has defined so far, `homes` decides what is compiled where, `generate` writes
//! the crate that the cell becomes (`source` remembers which bytes are the person's), `rustc` compiles
//! it, `cache` keeps it, `naming` says how later cells can write a type, `diagnose` puts the
//! compiler's words on the cell's lines, `extras` builds crates that a header names. `engine` walks a
//! cell along all of them and has the worker run it.

mod account;
mod cache;
mod diagnose;
mod engine;
mod extras;
mod generate;
mod header;
mod homes;
mod naming;
mod parse;
mod rustc;
mod source;
pub mod types;

pub use engine::{Engine, EngineError, Interrupter};
