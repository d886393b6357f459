//! Rotation: what do the components that are kept mean?
//!
//! The first k components span a space; any other axes in that space describe the rows as well. A
//! rotation looks for axes along which each variable belongs to as few components as possible, so
//! that the components can be named. Orthogonal rotations (varimax, quartimax, equamax) keep the
//! components uncorrelated, oblique ones (promax, direct oblimin) let them correlate where that
//! makes the pattern simpler.
//!
//! Conventions: A is the p × k matrix that is rotated, one row for each variable, and T the k × k
//! rotation matrix, whose columns have unit length.
//!
//! ```text
//! factor correlations  Φ = Tᵀ T        (the identity when T is orthogonal)
//! pattern loadings     Λ = A (Tᵀ)⁻¹    (A T when T is orthogonal)
//! structure            S = Λ Φ = A T   (the correlations, when A holds correlations)
//! rotated scores       G = F T         (F: scores of unit variance)
//! ```
//!
//! Rotated components stand in descending order of the variance they explain, and in each the
//! pattern loading of largest absolute value is positive (of loadings tied to a relative 1e-8, the
//! first). Kaiser normalisation, on unless switched off, brings every row of A to unit length while
//! the rotation is sought, so that all variables have the same say. Criteria have several maxima;
//! the search starts from the matrix as given and from random orthogonal positions, and keeps the
//! best.
//!
//! What to rotate: structure correlations of the first k components, which is what
//! [`rotated`](crate::components::PrincipalComponents::rotated) takes. Their columns carry the
//! components' spread (unit-length loadings times √variance), so that the rotated matrix still holds
//! correlations, communalities stay as they are, and rotated scores stay uncorrelated when T is
//! orthogonal. Unit-length loadings can be rotated too, but that gives a component of small variance
//! the same say as one of large variance, and the scores along the rotated axes become correlated.
//!
//! Sources: H. F. Kaiser (1958), "The varimax criterion for analytic rotation in factor analysis",
//! Psychometrika 23, 187–200; H. H. Harman (1976), "Modern Factor Analysis", 3rd edition, chapters
//! 13–14; A. E. Hendrickson and P. O. White (1964), "Promax: a quick method for rotation to oblique
//! simple structure", British Journal of Statistical Psychology 17, 65–70; R. I. Jennrich and
//! P. F. Sampson (1966), "Rotation for simple loadings", Psychometrika 31, 313–323; R. I. Jennrich
//! (2002), "A simple general method for oblique rotation", Psychometrika 67, 7–19; C. A. Bernaards
//! and R. I. Jennrich (2005), "Gradient projection algorithms and software for arbitrary rotation
//! criteria in factor analysis", Educational and Psychological Measurement 65, 676–696.

mod options;
mod result;

mod fit;

mod components;
mod exhibit;
mod oblimin;
mod orthomax;
mod promax;

#[cfg(test)]
mod tests;

pub use components::RotatedComponents;
pub(crate) use fit::check_finite;
pub use fit::{rotate, rotate_with};
pub use options::{Rotation, RotationOptions};
pub use result::Rotated;
