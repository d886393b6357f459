//! The analysis as the rules see it.

use nalgebra::DMatrix;

use super::options::{Effort, RetentionOptions};
use super::verdict::Reason;
use crate::components::{PrincipalComponents, Scaling};
use crate::distributions::normal_upper_quantile;

/// What may be computed without being asked for, in multiplications: some ten seconds.
const USUAL: f64 = 3e10;

/// Two-sided level at which Mardia's kurtosis speaks against normal rows (common practice, no
/// source: strict enough to pass small departures, which the tests bear).
const KURTOSIS_LEVEL: f64 = 0.01;

pub(super) struct Subject<'a> {
    /// All components of the data.
    pub(super) pca: &'a PrincipalComponents,
    pub(super) options: &'a RetentionOptions,
    pub(super) seed: u64,
    pub(super) n: usize,
    pub(super) p: usize,
    /// All m = min(n − 1, p) variances, zeros included, descending.
    pub(super) roots: Vec<f64>,
    pub(super) total: f64,
}

impl<'a> Subject<'a> {
    pub(super) fn new(
        pca: &'a PrincipalComponents,
        options: &'a RetentionOptions,
        seed: u64,
    ) -> Self {
        let (n, p) = (pca.n_rows(), pca.n_variables());
        let mut roots = pca.variances().as_slice().to_vec();
        roots.resize((n - 1).min(p), 0.0);
        Subject { pca, options, seed, n, p, roots, total: pca.total_variance() }
    }

    /// The variance that each variable would have on average along any direction.
    pub(super) fn mean_root(&self) -> f64 {
        self.total / self.p as f64
    }

    /// The rows, centred and scaled as the analysis scales them.
    pub(super) fn scaled_rows(&self) -> DMatrix<f64> {
        let mut rows = self.pca.data().values().clone();
        for (j, mut column) in rows.column_iter_mut().enumerate() {
            column.add_scalar_mut(-self.pca.mean()[j]);
            column /= self.pca.scale()[j];
        }
        rows
    }

    pub(super) fn needs_correlation(&self) -> Result<(), Reason> {
        let fits = self.pca.scaling() == Scaling::Correlation;
        fits.then_some(()).ok_or(Reason::NeedsCorrelation)
    }

    pub(super) fn needs_covariance(&self) -> Result<(), Reason> {
        let fits = self.pca.scaling() == Scaling::Covariance;
        fits.then_some(()).ok_or(Reason::NeedsCovariance)
    }

    pub(super) fn needs_equal_rows(&self) -> Result<(), Reason> {
        if self.pca.is_weighted() { Err(Reason::Weighted) } else { Ok(()) }
    }

    pub(super) fn needs_more_rows(&self) -> Result<(), Reason> {
        if self.n > self.p {
            return Ok(());
        }
        Err(Reason::NeedsMoreRows { n_rows: self.n, n_variables: self.p })
    }

    pub(super) fn needs_full_rank(&self) -> Result<(), Reason> {
        let (rank, needed) = (self.pca.n_components(), self.roots.len());
        if rank == needed { Ok(()) } else { Err(Reason::RankDeficient { rank, needed }) }
    }

    pub(super) fn needs_components(&self, needed: usize) -> Result<(), Reason> {
        let found = self.roots.len();
        if found >= needed { Ok(()) } else { Err(Reason::TooFewComponents { needed, found }) }
    }

    /// For rules that simulate, resample or cross-validate.
    pub(super) fn needs_time(&self, operations: f64) -> Result<(), Reason> {
        if self.options.chosen_effort() == Effort::Formulas {
            return Err(Reason::LeftOut);
        }
        self.needs_usual_time(operations)
    }

    /// For formulas that are long where there are many variables.
    pub(super) fn needs_usual_time(&self, operations: f64) -> Result<(), Reason> {
        if self.options.chosen_effort() == Effort::Full || operations <= USUAL {
            return Ok(());
        }
        Err(Reason::TooLong { operations })
    }

    /// Chi-squared tests of a covariance structure go wrong with the kurtosis of the rows first of
    /// all (R. J. Muirhead and C. M. Waternaux (1980), Biometrika 67, 31–43), so that is what is
    /// looked at.
    pub(super) fn needs_normal_rows(&self) -> Result<(), Reason> {
        if self.options.assumes_normal() {
            return Ok(());
        }
        let kurtosis = self.kurtosis();
        // What is not a number must not pass for normal.
        if kurtosis.abs() <= normal_upper_quantile(KURTOSIS_LEVEL / 2.0) {
            return Ok(());
        }
        Err(Reason::NotNormal { kurtosis })
    }

    /// Mardia's kurtosis, standardised by its mean and large-sample variance for normal rows
    /// (K. V. Mardia (1970), "Measures of multivariate skewness and kurtosis with applications",
    /// Biometrika 57, 519–530).
    ///
    /// ```text
    /// b = (1/n) Σ_i d_i⁴,  d_i² = n/(n − 1) Σ_k z_ik² / λ_k
    /// (b − p (p + 2) (n − 1)/(n + 1)) / √(8 p (p + 2) / n)
    /// ```
    fn kurtosis(&self) -> f64 {
        let (n, p) = (self.n as f64, self.pca.n_components() as f64);
        let mut distances = vec![0.0; self.n];
        let scores = self.pca.scores().values();
        for (column, root) in scores.column_iter().zip(&self.roots) {
            for (distance, score) in distances.iter_mut().zip(column.iter()) {
                *distance += score * score / root;
            }
        }
        let factor = n / (n - 1.0);
        let mean = distances.iter().map(|d| (factor * d).powi(2)).sum::<f64>() / n;
        let expected = p * (p + 2.0) * (n - 1.0) / (n + 1.0);
        (mean - expected) / (8.0 * p * (p + 2.0) / n).sqrt()
    }
}
