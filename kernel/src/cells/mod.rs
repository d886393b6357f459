//! A cell's way from its text to its output.
//!
//! `engine` is one session. Read on in this order: `header` takes the front matter off, `parse` takes
//! the Rust apart (`edits` notes what must be put into it), `account` is what the session has defined, `homes` decides what is compiled where, `generate` writes
//! the crate that the cell becomes (`source` remembers which bytes are the person's), `rustc` compiles
//! it, `cache` keeps it, `naming` says how later cells can write a type, `diagnose` puts the
//! compiler's words on the cell's lines, `extras` builds crates that a header names, `prepare` walks a
//! cell along all of these to a library, `aftermath` brings the account up to date when it has run, and
//! `scope` tells help what there is; `lineage` knows what each value was made from (`changes` reads it
//! off the text), and `names` reads a cell without a session.

mod account;
mod aftermath;
mod cache;
mod changes;
mod diagnose;
mod edits;
mod engine;
mod extras;
mod generate;
mod header;
mod homes;
mod lineage;
pub mod names;
mod naming;
mod parse;
mod prepare;
mod rustc;
mod scope;
mod source;
pub mod types;

pub use engine::Engine;
