//! Transformations: in which units should variables be looked at before they are analysed?
//!
//! Amounts that grow by factors are compared on a logarithmic scale, parts of a whole by ratios,
//! skewed measurements by a power that makes them symmetric, and measurements in different units by
//! how far they lie from their middle. [`Transform`] says which transformation is wanted of which
//! columns; [`transformed`](crate::table::DataMatrix::transformed) fits it to the rows of a matrix
//! and yields the matrix in the new units, which remembers what was done as a chain of
//! [`Transformation`]s. The chain can be repeated on new rows with the numbers fitted before
//! ([`transformed_as`](crate::table::DataMatrix::transformed_as)), undone
//! ([`untransformed`](crate::table::DataMatrix::untransformed)) and saved.
//!
//! Conventions: logarithms are natural unless the name says ten; divisors are n − 1; row weights
//! count in means, standard deviations and likelihoods, not in medians and ranges. A value outside
//! the domain of a transformation is an error that names its column and row: nothing is shifted,
//! cut off or left out.
//!
//! Sources: G. E. P. Box and D. R. Cox (1964), "An analysis of transformations", Journal of the
//! Royal Statistical Society B 26, 211–252; J. Aitchison (1986), "The Statistical Analysis of
//! Compositional Data", chapter 4 (centred log-ratios); F. R. Hampel (1974), "The influence curve
//! and its role in robust estimation", Journal of the American Statistical Association 69, 383–393
//! (the median absolute deviation).

mod options;
mod result;

mod fit;
mod matrix;

mod exhibit;
mod power;
mod saved;

#[cfg(test)]
mod tests;

pub use options::Transform;
pub use power::ExponentEstimate;
pub use result::{Exponent, Formula, Linear, Transformation};
