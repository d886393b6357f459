//! Comparison: do two analyses say the same?
//!
//! Two samples, two years, two ways of preparing the data: each gives loadings and scores, and the
//! question is how alike they are. Congruence coefficients compare components one by one;
//! Procrustes turns one configuration onto the other and measures what is left; principal angles
//! compare the spaces that components span, which do not care how components are turned within
//! them.
//!
//! Conventions: what is compared has the same rows in the same order, by name (variables for
//! loadings, units for scores); the first matrix is the one that is held fixed; signs and order of
//! components, which are arbitrary, do not count as differences.
//!
//! Sources: L. R. Tucker (1951), "A method for synthesis of factor analysis studies"; U. Lorenzo-Seva
//! and J. M. F. ten Berge (2006), "Tucker's congruence coefficient as a meaningful index of factor
//! similarity", Methodology 2, 57–64; P. H. Schönemann (1966), "A generalized solution of the
//! orthogonal Procrustes problem", Psychometrika 31, 1–10; J. C. Gower (1975), "Generalized
//! Procrustes analysis", Psychometrika 40, 33–51; D. A. Jackson (1995), "PROTEST: a Procrustean
//! randomization test of community environment concordance", Écoscience 2, 297–303; Å. Björck and
//! G. H. Golub (1973), "Numerical methods for computing angles between linear subspaces",
//! Mathematics of Computation 27, 579–594.

mod options;

mod angles;
mod congruence;
mod procrustes;

mod assignment;
mod check;
mod exhibit;

#[cfg(test)]
mod tests;

pub use angles::{PrincipalAngles, principal_angles};
pub use congruence::{Congruence, MatchedComponents, Similarity, congruence};
pub use options::{ProcrustesOptions, ProcrustesTestOptions};
pub use procrustes::{Procrustes, ProcrustesTest, procrustes, procrustes_test, procrustes_with};
