//! Principal components: which few combined measures carry what a table of many says?
//!
//! Components are the directions, perpendicular to one another, along which the cloud of rows
//! spreads most; the spread along each is its variance. Conventions: rows are observations and
//! columns are variables; the divisor is n − 1; variances are descending and those of repeated
//! size are in no particular order; loadings have unit length; in each component the loading of
//! largest absolute value is positive, and of loadings tied for largest (to a relative 1e-8) the
//! first in variable order. Components without variance are not reported: their number is the
//! numerical rank, by a rule stated at [`FittedComponents::rank`]. Rows can be weighted
//! ([`DataMatrix::with_weights`](crate::table::DataMatrix::with_weights)): means, variances and
//! loadings then are weighted ones.
//!
//! [`principal_components`] suits the way of computing to the data; [`principal_components_with`]
//! lets the analyst choose it, and how many components to keep. What the components mean is asked of
//! the result: structure, communalities, contributions, supplementary columns and groups. An
//! analysis can be saved and used on new rows where the rows themselves are not at hand; that part
//! of it is a [`FittedComponents`].
//!
//! Sources: K. Pearson (1901), "On lines and planes of closest fit to systems of points in
//! space"; H. Hotelling (1933), "Analysis of a complex of statistical variables into principal
//! components"; I. T. Jolliffe (2002), "Principal Component Analysis", 2nd edition, chapters 1–3.
//!
//! In some fields "loading" means the correlation of a variable with a component. Here that is
//! [`structure`](FittedComponents::structure), and loadings are the unit-length coefficients.

mod fitted;
mod options;
mod result;

mod fit;
mod randomised;

mod columns;
pub(crate) mod cross;
mod exhibit;
mod meaning;
mod row_weights;
mod saved;
pub(crate) mod scores;
pub(crate) mod spectrum;
mod supplementary;
mod ties;
pub(crate) mod views;
mod ways;

#[cfg(test)]
mod tests;

pub use fit::{principal_components, principal_components_with};
pub use fitted::FittedComponents;
pub use meaning::Communalities;
pub use options::{ComponentOptions, Decomposition, RandomisedOptions, Route, Scaling};
pub use randomised::Approximation;
pub use result::{PrincipalComponents, Reconstruction};
pub use supplementary::{SupplementaryColumns, SupplementaryGroups};

pub(crate) use fitted::same_variables;
