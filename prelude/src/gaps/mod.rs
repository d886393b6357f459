//! Holes in a table: what would the missing cells hold, and how sure is that?
//!
//! Cells that go missing need not take their row or column with them. Variables that vary together
//! say something about each other, and components gather what they say: [`estimate_missing`] fits
//! components to the cells that are there, completes the table from them, marks every cell that
//! was estimated and says how far it may be off. [`probabilistic_components`] gives the fit itself,
//! for whoever wants components of a table with holes rather than a completed table.
//!
//! Conventions: rows are observations and columns are variables; a hole is NaN in a
//! [`GappedMatrix`](crate::table::GappedMatrix). Variances have the divisor n, as maximum
//! likelihood has it. Signs follow the rule of [`components`](crate::components). The methods take
//! a cell to be missing for reasons that have to do with the observed cells at most, not with the
//! value that it would have shown: a gauge that fails at high readings breaks that.
//!
//! Estimated cells are not measurements. An analysis of a completed table takes them for such, and
//! so is surer of itself than it may be; [`draws`](GapOptions::draws) shows by how much. Where a
//! result feeds a decision that can hurt someone, measure again: a statistical estimate is no
//! evidence that a limit was kept.
//!
//! Sources: M. E. Tipping and C. M. Bishop (1999), "Probabilistic principal component analysis",
//! Journal of the Royal Statistical Society B 61, 611–622; A. Ilin and T. Raiko (2010), "Practical
//! approaches to principal component analysis in the presence of missing values", Journal of
//! Machine Learning Research 11, 1957–2000; J. Josse and F. Husson (2012), "Handling missing
//! values in exploratory multivariate data analysis methods", Journal de la SFdS 153(2), 79–99.

mod options;
mod result;

mod fit;

mod choose;
mod complete;
mod em;
mod exhibit;
mod iterative;
mod patterns;
mod probabilistic;
mod roots;
mod settle;
mod small;

#[cfg(test)]
mod tests;

pub use complete::{components_for_gaps, estimate_missing};
pub use options::{ComponentRule, GapMethod, GapOptions, ProbabilisticOptions};
pub use probabilistic::{ProbabilisticComponents, probabilistic_components};
pub use result::{Completed, ComponentChoice, EstimatedCell, PredictionError, Starts};
