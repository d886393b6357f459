//! What a Semiaxis cell finds preloaded: tables, matrices, multivariate statistics and exhibits.

pub mod adequacy;
pub mod comparison;
pub mod components;
pub mod distances;
pub mod error;
pub mod exhibit;
pub mod gaps;
pub mod live;
pub mod parallel;
pub mod prelude;
pub mod random;
pub mod retention;
pub mod robust;
pub mod rotation;
pub mod stability;
pub mod table;
pub mod transform;

mod distributions;
mod quantile;
mod repeat;

pub use error::{Error, Result};
pub use nalgebra;
pub use polars;

#[cfg(test)]
#[path = "../../tests/src/compare.rs"]
mod compare;
