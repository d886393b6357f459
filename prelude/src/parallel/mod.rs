//! Parallel analysis: how many components stand out from what noise of the same size would give?
//!
//! Tables of pure noise also have a largest component, and its variance is well above one when
//! rows are few. Parallel analysis draws many such tables of the same shape, decomposes each, and
//! asks how many of the observed variances exceed what noise gives at the same place. Horn's rule
//! compares with the mean over the tables, Glorfeld's with a high percentile of them.
//!
//! Conventions: roots of the correlation matrix, or of the reduced one; roots descending; counting stops at the
//! first variance that does not exceed its threshold; percentiles interpolate linearly between
//! order statistics (definition 7 of Hyndman and Fan). Each replicate has a generator of its own,
//! derived from the seed and the replicate's number, so that results depend on the seed only and
//! not on the number of threads. Rows that carry weights are refused: noise would need them too, and
//! nothing says how.
//!
//! Sources: J. L. Horn (1965), "A rationale and test for the number of factors in factor
//! analysis", Psychometrika 30, 179–185; L. W. Glorfeld (1995), "An improvement on Horn's parallel
//! analysis methodology", Educational and Psychological Measurement 55, 377–393; A. Buja and
//! N. Eyuboglu (1992), "Remarks on parallel analysis", Multivariate Behavioral Research 27,
//! 509–540, for permuted data.

mod options;
mod result;

mod exhibit;
mod fit;
mod noise;
mod reduced;

#[cfg(test)]
mod tests;

pub use fit::parallel_analysis;
pub use options::{Noise, ParallelOptions, RootsOf};
pub use result::ParallelAnalysis;
