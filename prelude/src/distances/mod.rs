//! Distances: which rows do not belong with the others, and which variables say so?
//!
//! Components split a row into two parts: its place among the components that are kept, and what
//! they leave of it. A row can be far out along the pattern of the others (its score distance is
//! large), or off that pattern (its orthogonal distance is large), or both. [`distances`] measures
//! both for any fitted components, classical or robust, beside the cut-offs of the robust
//! literature. [`t_squared_and_q`] gives Hotelling's T² and the residual statistic Q of classical
//! components with the limits that quality control uses, for rows of the fitted table and for new
//! ones. Both say how much each variable contributed.
//!
//! Conventions: rows are observations; deviations are taken from the centre of the analysis and
//! scaled as the analysis scales them; variances have the divisor n − 1; a coverage of 0.975 means
//! that of rows that follow the model 97.5 % stay within the limit. T² is the square of the score
//! distance, Q the square of the orthogonal distance. Limits assume rows that are about normal,
//! and directions that are known rather than estimated. They are statements about a table:
//! statistical limits are not safety limits; local codes and licensed practice decide.
//!
//! Sources: M. Hubert, P. J. Rousseeuw and K. Vanden Branden (2005), "ROBPCA: a new approach to
//! robust principal component analysis", Technometrics 47, 64–79; J. E. Jackson (1991), "A User's
//! Guide to Principal Components", chapters 1 and 2; the source of each limit stands beside it.

mod result;

mod contributions;
mod exhibit;
mod hotelling;
mod limits;
mod model;

#[cfg(test)]
mod tests;

pub use contributions::Contributions;
pub use hotelling::{TSquaredAndQ, t_squared_and_q};
pub use limits::{QLimit, QRule, TSquaredRule};
pub use model::ComponentModel;
pub use result::{Distances, Standing, distances, distances_of};

pub(crate) use exhibit::CAUTION;
pub(crate) use limits::{orthogonal_limit, orthogonal_moments};
pub(crate) use model::{Plane, sealed};
pub(crate) use result::fitted_distances;
