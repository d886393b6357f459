//! The one error type of the prelude.

/// What can go wrong in the prelude.
#[derive(Debug)]
#[non_exhaustive]
pub enum Error {}

/// The prelude's result.
pub type Result<T, E = Error> = std::result::Result<T, E>;
