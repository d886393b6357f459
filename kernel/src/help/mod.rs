//! Help while typing: whether a cell is complete, what could follow, what a name means.
//!
//! Everything here is read from text and from two lists, what the session defines ([`Scope`]) and
//! what the prelude offers ([`Index`]); nothing is compiled, so an answer takes milliseconds. Types
//! are followed through names, calls and methods as far as signatures tell; where they do not tell,
//! nothing is suggested rather than something wrong. Positions are counted in Unicode code points,
//! as the messaging protocol does.
//!
//! [`Scope`]: crate::cells::types::Scope

pub mod complete;
pub mod completeness;
pub mod index;
pub mod inspect;
pub mod lexer;
mod types;
mod words;

pub use complete::{Completions, complete};
pub use completeness::{Completeness, completeness};
pub use index::Index;
pub use inspect::inspect;

#[cfg(test)]
mod tests;
