//! What a parallel analysis says.

use nalgebra::DVector;

use super::options::{Noise, ParallelOptions, RootsOf};

/// Observed variances beside those of tables without structure; made by
/// [`parallel_analysis`](super::parallel_analysis).
///
/// Every vector has one entry for each component of the observed data, min(n − 1, p) or fewer
/// where the data are rank-deficient, variances descending. For reduced correlations there are p
/// roots, some of them negative, instead of variances.
#[derive(Debug, Clone, PartialEq)]
pub struct ParallelAnalysis {
    pub(super) observed: DVector<f64>,
    pub(super) noise_mean: DVector<f64>,
    pub(super) noise_percentile: DVector<f64>,
    pub(super) noise_deviation: DVector<f64>,
    pub(super) n_rows: usize,
    pub(super) n_variables: usize,
    pub(super) options: ParallelOptions,
    pub(super) seed: u64,
}

impl ParallelAnalysis {
    /// The variances of the data's components (of the correlation matrix), or the roots of the
    /// reduced correlation matrix, descending.
    pub fn observed(&self) -> &DVector<f64> {
        &self.observed
    }

    /// Horn's thresholds: the mean over the tables of the variance at each place.
    pub fn noise_mean(&self) -> &DVector<f64> {
        &self.noise_mean
    }

    /// Glorfeld's thresholds: the chosen percentile over the tables of the variance at each place.
    pub fn noise_percentile(&self) -> &DVector<f64> {
        &self.noise_percentile
    }

    /// The standard deviation (divisor: tables − 1) over the tables of the variance at each place;
    /// divided by the root of their number, it says how far the mean may still move.
    pub fn noise_deviation(&self) -> &DVector<f64> {
        &self.noise_deviation
    }

    /// How many leading components exceed the mean of noise (Horn).
    pub fn n_by_mean(&self) -> usize {
        leading(&self.observed, &self.noise_mean)
    }

    /// How many leading components exceed the percentile of noise (Glorfeld).
    pub fn n_by_percentile(&self) -> usize {
        leading(&self.observed, &self.noise_percentile)
    }

    /// The number n of rows.
    pub fn n_rows(&self) -> usize {
        self.n_rows
    }

    /// The number p of variables.
    pub fn n_variables(&self) -> usize {
        self.n_variables
    }

    /// The number of tables without structure.
    pub fn n_replicates(&self) -> usize {
        self.options.n_replicates()
    }

    /// The percentile of Glorfeld's thresholds.
    pub fn percentile(&self) -> f64 {
        self.options.chosen_percentile()
    }

    /// What the tables were made of.
    pub fn noise(&self) -> Noise {
        self.options.chosen_noise()
    }

    /// Which matrix had its roots compared.
    pub fn roots_of(&self) -> RootsOf {
        self.options.chosen_roots()
    }

    /// The seed; the same seed gives the same numbers.
    pub fn seed(&self) -> u64 {
        self.seed
    }
}

fn leading(observed: &DVector<f64>, threshold: &DVector<f64>) -> usize {
    observed.iter().zip(threshold.iter()).take_while(|(seen, limit)| seen > limit).count()
}
