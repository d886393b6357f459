//! Are the variables worth analysing together, and are the rows as normal as tests need?
//!
//! Components of variables that hang together little are the variables again. [`adequacy`] asks
//! whether any correlation stands out of noise (Bartlett's test of sphericity), whether
//! correlations are shared among many variables or belong to pairs (the Kaiser–Meyer–Olkin
//! measure), and how close the correlation matrix is to being singular.
//! [`multivariate_normality`] asks whether rows can come from a multivariate normal distribution,
//! on which Bartlett's and many other tests stand; it is part of [`adequacy`] too.
//!
//! Conventions: p-values are upper tails; the correlation matrix must have full rank, which takes
//! more rows than variables; covariance matrices inside the tests of normality have the divisor n.
//! None of this decides anything by itself: with many rows every test finds something, and a
//! measure says nothing about what a variable is good for.
//!
//! Sources: M. S. Bartlett (1951), "The effect of standardization on a χ² approximation in factor
//! analysis", Biometrika 38, 337–344; H. F. Kaiser (1970), "A second generation little jiffy",
//! Psychometrika 35, 401–415, and (1974), "An index of factorial simplicity", Psychometrika 39,
//! 31–36; K. V. Mardia (1970), "Measures of multivariate skewness and kurtosis with applications",
//! Biometrika 57, 519–530, and (1974), "Applications of some measures of multivariate skewness and
//! kurtosis in testing normality and robustness studies", Sankhyā B 36, 115–128; N. Henze and
//! B. Zirkler (1990), "A class of invariant consistent tests for multivariate normality",
//! Communications in Statistics: Theory and Methods 19, 3595–3617.

mod result;

mod fit;
mod normality;

mod exhibit;

#[cfg(test)]
mod tests;

pub use fit::adequacy;
pub use normality::multivariate_normality;
pub use result::{
    Adequacy, HenzeZirklerTest, KurtosisTest, MultivariateNormality, SkewnessTest, SphericityTest,
};
