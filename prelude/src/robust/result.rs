//! What a robust scatter says.

use std::sync::Arc;

use nalgebra::{DMatrix, DVector};

use super::fit::{Factors, Fitted};
use super::options::RobustOptions;
use super::univariate::KEPT;
use crate::distributions::chi_squared_quantile;
use crate::table::{DataMatrix, NamedMatrix};

/// Centre and covariance of the rows that belong together, and the distance of every row from
/// them; made by [`robust_scatter`](super::robust_scatter).
///
/// Throughout, n is the number of rows, p that of variables and h that of rows in the subset.
#[derive(Debug, Clone)]
pub struct RobustScatter {
    data: DataMatrix,
    centre: DVector<f64>,
    covariance: NamedMatrix,
    raw_centre: DVector<f64>,
    raw_covariance: NamedMatrix,
    distances: DVector<f64>,
    raw_distances: DVector<f64>,
    kept: Vec<bool>,
    subset: Vec<usize>,
    log_determinant: f64,
    raw_factors: Factors,
    factors: Factors,
    n_steps: usize,
    converged: bool,
    options: RobustOptions,
    seed: u64,
}

impl RobustScatter {
    pub(super) fn new(
        x: &DataMatrix,
        fitted: Box<Fitted>,
        options: RobustOptions,
        seed: u64,
    ) -> Self {
        let names: Arc<[String]> = x.shared_variables();
        let named = |values: DMatrix<f64>| {
            NamedMatrix::new(values, names.clone(), names.clone()).expect("one name per variable")
        };
        let roots = |squares: Vec<f64>| DVector::from_vec(squares).map(f64::sqrt);
        RobustScatter {
            data: x.clone(),
            centre: fitted.centre,
            covariance: named(fitted.covariance),
            raw_centre: fitted.raw_centre,
            raw_covariance: named(fitted.raw_covariance),
            distances: roots(fitted.squares),
            raw_distances: roots(fitted.raw_squares),
            kept: fitted.kept,
            subset: fitted.subset.into_iter().map(|row| row as usize).collect(),
            log_determinant: fitted.log_determinant,
            raw_factors: fitted.raw_factors,
            factors: fitted.factors,
            n_steps: fitted.n_steps,
            converged: fitted.converged,
            options,
            seed,
        }
    }

    /// The robust centre, p values in the units of the variables: the mean of the rows that
    /// reweighting kept.
    pub fn centre(&self) -> &DVector<f64> {
        &self.centre
    }

    /// The robust covariance matrix, p × p: that of the rows that reweighting kept (divisor: their
    /// number − 1), times [`consistency_factor`](Self::consistency_factor) and
    /// [`small_sample_factor`](Self::small_sample_factor).
    pub fn covariance(&self) -> &NamedMatrix {
        &self.covariance
    }

    /// The correlation matrix that belongs to [`covariance`](Self::covariance).
    pub fn correlation(&self) -> NamedMatrix {
        let values = self.covariance.values();
        let deviation: Vec<f64> = values.diagonal().iter().map(|v| v.sqrt()).collect();
        let mut correlation = DMatrix::from_fn(values.nrows(), values.ncols(), |i, j| {
            values[(i, j)] / deviation[i] / deviation[j]
        });
        correlation.fill_diagonal(1.0);
        let names = self.covariance.shared_column_names();
        NamedMatrix::new(correlation, names.clone(), names).expect("the shape of the covariance")
    }

    /// The mean of the h rows of the subset.
    pub fn raw_centre(&self) -> &DVector<f64> {
        &self.raw_centre
    }

    /// The covariance matrix of the subset (divisor h − 1), times the two raw factors.
    pub fn raw_covariance(&self) -> &NamedMatrix {
        &self.raw_covariance
    }

    /// The distance of each row from the centre by the robust covariance.
    ///
    /// ```text
    /// d_i = √( (x_i − m)ᵀ S⁻¹ (x_i − m) )
    /// ```
    pub fn distances(&self) -> &DVector<f64> {
        &self.distances
    }

    /// The distances by the raw centre and covariance.
    pub fn raw_distances(&self) -> &DVector<f64> {
        &self.raw_distances
    }

    /// The cut-off for distances, √χ²_{p, 0.975}. Of rows that follow the model about 2.5 % pass it.
    pub fn limit(&self) -> f64 {
        chi_squared_quantile(KEPT, self.n_variables() as f64).sqrt()
    }

    /// The labels of the rows beyond the cut-off, in row order.
    pub fn flagged(&self) -> Vec<&str> {
        let limit = self.limit();
        (self.labels().iter().zip(self.distances.iter()))
            .filter(|(_, distance)| **distance > limit)
            .map(|(label, _)| label.as_str())
            .collect()
    }

    /// Whether reweighting kept each row, in row order: those within the cut-off of the raw
    /// distances.
    pub fn kept(&self) -> &[bool] {
        &self.kept
    }

    /// The h rows of least determinant, ascending, counted from 0.
    pub fn subset(&self) -> &[usize] {
        &self.subset
    }

    /// The natural logarithm of the determinant of the subset's covariance (divisor h − 1), before
    /// any factor. It depends on the units of the variables.
    pub fn log_determinant(&self) -> f64 {
        self.log_determinant
    }

    /// What makes the covariance consistent for normal rows (Croux and Haesbroeck 1999), for the
    /// share of rows that reweighting kept.
    pub fn consistency_factor(&self) -> f64 {
        self.factors.consistency
    }

    /// What corrects the covariance for few rows (Pison, Van Aelst and Willems 2002).
    pub fn small_sample_factor(&self) -> f64 {
        self.factors.small_sample
    }

    /// As [`consistency_factor`](Self::consistency_factor), of the raw covariance: for the share
    /// h / n.
    pub fn raw_consistency_factor(&self) -> f64 {
        self.raw_factors.consistency
    }

    /// As [`small_sample_factor`](Self::small_sample_factor), of the raw covariance.
    pub fn raw_small_sample_factor(&self) -> f64 {
        self.raw_factors.small_sample
    }

    /// The concentration steps that the best candidate took in the last round.
    pub fn n_steps(&self) -> usize {
        self.n_steps
    }

    /// Whether those steps came to an end.
    pub fn converged(&self) -> bool {
        self.converged
    }

    /// The matrix that was analysed.
    pub fn data(&self) -> &DataMatrix {
        &self.data
    }

    /// The names of the variables, in order.
    pub fn variables(&self) -> &[String] {
        self.data.variables()
    }

    /// The labels of the rows, in order.
    pub fn labels(&self) -> &[String] {
        self.data.labels()
    }

    /// The number n of rows.
    pub fn n_rows(&self) -> usize {
        self.data.n_rows()
    }

    /// The number p of variables.
    pub fn n_variables(&self) -> usize {
        self.data.n_cols()
    }

    /// The number h of rows in the subset.
    pub fn subset_size(&self) -> usize {
        self.subset.len()
    }

    /// The options it was made with.
    pub fn options(&self) -> RobustOptions {
        self.options
    }

    /// The seed; the same seed gives the same numbers.
    pub fn seed(&self) -> u64 {
        self.seed
    }
}
