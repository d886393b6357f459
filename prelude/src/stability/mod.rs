//! How far would the components move if the rows had been others?
//!
//! Three answers. [`asymptotic_errors`] says what theory expects of normal rows: standard errors
//! and intervals for variances and loadings, at no cost. [`bootstrap`] draws rows with replacement,
//! fits again and again, and reads errors and intervals off the spread, whatever the distribution
//! of the rows. [`leave_out`] fits without each row in turn and says which rows the result hangs
//! on. A component whose variance is close to its neighbour's has no direction of its own: look at
//! the angle between subspaces before looking at single loadings.
//!
//! Conventions: every refit is scaled as the analysis was, with its own means and scales, and the
//! divisor of its own rows less one; components of a refit are put beside those of the analysis by
//! their congruence (the cosine between loadings) and take their signs; variances stay in
//! descending order; angles are in degrees, the largest one between subspaces being the measure.
//! Intervals say where a quantity of the population may lie, not where new units will: they are
//! statistical limits, not safety limits.
//!
//! Sources: M. A. Girshick (1939), "On the sampling theory of roots of determinantal equations",
//! Annals of Mathematical Statistics 10, 203–224; T. W. Anderson (1963), "Asymptotic theory for
//! principal component analysis", Annals of Mathematical Statistics 34, 122–148; B. Efron (1987),
//! "Better bootstrap confidence intervals", Journal of the American Statistical Association 82,
//! 171–185; Å. Björck and G. H. Golub (1973), "Numerical methods for computing angles between
//! linear subspaces", Mathematics of Computation 27, 579–594; F. Critchley (1985), "Influence in
//! principal components analysis", Biometrika 72, 627–636.

mod options;
mod result;

mod asymptotic;
mod bootstrap;
mod leave_out;

mod align;
mod influence;
mod intervals;
mod refit;

mod exhibit;

#[cfg(test)]
mod tests;

pub use asymptotic::asymptotic_errors;
pub use bootstrap::bootstrap;
pub use leave_out::leave_out;
pub use options::{Alignment, AsymptoticOptions, BootstrapOptions, LeaveOutOptions};
pub use result::{AsymptoticErrors, Bands, Bootstrap, LeaveOut, Spread};
