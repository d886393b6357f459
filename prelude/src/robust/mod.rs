//! Robust location, scatter and components: what do most rows say, whatever the rest?
//!
//! A mean, a covariance matrix and components follow a handful of wild rows anywhere, and
//! distances measured from them then hide those rows. Here centre and scatter come from the h rows
//! that lie most tightly together ([`robust_scatter`]), and components from those
//! ([`robust_components`]): up to n − h rows may hold anything.
//!
//! Conventions: rows are observations and columns are variables; h is ⌊2m − n + 2(n − m)α⌋ with
//! m = ⌊(n + p + 1)/2⌋ and α the share that the options ask for (0.75 unless told otherwise; 0.5
//! stands most contamination); scatter is made consistent for normal rows and corrected for few
//! rows; signs of loadings follow the rule of [`components`](crate::components). Rows of unequal
//! weight are refused, since the theory does not cover them. Random starts are drawn from
//! generators of their own, so that results depend on the seed only and not on the number of
//! threads.
//!
//! Sources: P. J. Rousseeuw (1985), "Multivariate estimation with high breakdown point";
//! P. J. Rousseeuw and K. Van Driessen (1999), "A fast algorithm for the minimum covariance
//! determinant estimator", Technometrics 41, 212–223; M. Hubert, P. J. Rousseeuw and K. Vanden
//! Branden (2005), "ROBPCA: a new approach to robust principal component analysis",
//! Technometrics 47, 64–79.

mod options;
mod result;

mod components;
mod correction;
mod exhibit;
mod fit;
mod mcd;
mod outlyingness;
mod projection;
mod subsets;
pub(crate) mod univariate;

#[cfg(test)]
mod tests;

pub use components::{RobustComponents, RobustRoute, robust_components};
pub use fit::robust_scatter;
pub use options::RobustOptions;
pub use result::RobustScatter;
