//! The ways to decompose: by either cross-product, by singular values, by random sampling.

use nalgebra::{DMatrix, DVector};

use super::columns::Columns;
use super::cross::{self, CrossProduct, Moments};
use super::options::{RandomisedOptions, Route, Scaling};
use super::randomised::{self, Approximation};
use super::row_weights::RowWeights;
use super::scores::Standardised;
use super::spectrum::{self, Spectrum};
use crate::error::{Error, Result};
use crate::live::checkpoint;
use crate::table::DataMatrix;

/// A cross-product is trusted while its smallest root is at least this share of its largest.
///
/// Squaring the data squares their condition number: a root λₖ of a cross-product carries a
/// relative error of about ε λ₁/λₖ (G. H. Golub and C. F. Van Loan (2013), "Matrix Computations",
/// 4th edition, sections 8.1.2 and 8.6), here at most some 2e-11. Below it the data themselves
/// are decomposed.
const TRUSTED: f64 = 1e-5;

/// What is to be decomposed.
pub(super) struct Task<'a> {
    pub(super) x: &'a DataMatrix,
    pub(super) scaling: Scaling,
    pub(super) weights: Option<RowWeights>,
}

/// What every way of decomposing hands over.
pub(super) struct Fitted {
    pub(super) columns: Columns,
    pub(super) route: Route,
    pub(super) tolerance: f64,
    pub(super) variances: DVector<f64>,
    pub(super) loadings: DMatrix<f64>,
    pub(super) scores: Option<DMatrix<f64>>,
    pub(super) approximation: Option<Approximation>,
}

impl Task<'_> {
    fn divisor(&self) -> f64 {
        (self.x.n_rows() - 1) as f64
    }

    pub(super) fn columns(&self) -> Result<Columns> {
        let moments = cross::moments(self.x.values(), self.weights.as_ref());
        checkpoint();
        Columns::checked(self.x, moments, self.scaling)
    }

    pub(super) fn by_variables(&self, forced: bool) -> Result<Fitted> {
        let (x, scaling) = (self.x, self.scaling);
        let CrossProduct { mean, mut lower } = cross::of_columns(x.values(), self.weights.as_ref());
        checkpoint();
        let sum_squares = lower.diagonal();
        let moments = Moments { mean, sum_squares: sum_squares.clone() };
        let columns = Columns::checked(x, moments, scaling)?;
        if !(forced || columns.varies_throughout()) {
            return self.by_singular_values(columns);
        }
        // Brought near one, so that no product of entries overflows: by each column's own spread
        // for correlations, by the largest one for covariances.
        let unit = match scaling {
            Scaling::Correlation => sum_squares.map(f64::sqrt),
            Scaling::Covariance => DVector::repeat(x.n_cols(), sum_squares.max().sqrt()),
        };
        for (j, mut column) in lower.column_iter_mut().enumerate() {
            for i in j..unit.len() {
                column[i] = column[i] / unit[i] / unit[j];
            }
        }
        if scaling == Scaling::Correlation {
            lower.fill_diagonal(1.0);
        }
        let Spectrum { roots, vectors } = spectrum::symmetric(lower)?;
        checkpoint();
        if !(forced || is_trusted(&roots)) {
            return self.by_singular_values(columns);
        }
        let variances = match scaling {
            Scaling::Correlation => roots,
            Scaling::Covariance => roots * (sum_squares.max() / self.divisor()),
        };
        let mut tolerance = columns.tolerance(x, (variances[0] * self.divisor()).sqrt());
        if !is_trusted(&variances) {
            tolerance = tolerance.max(rounding_of_roots(&variances));
        }
        let rank = rank(&variances, tolerance).min(x.n_rows() - 1);
        Ok(Fitted {
            tolerance,
            columns,
            route: Route::VariableCrossProduct,
            variances: variances.rows(0, rank).into_owned(),
            loadings: first_columns(vectors, rank),
            scores: None,
            approximation: None,
        })
    }

    pub(super) fn by_rows(&self, forced: bool) -> Result<Fitted> {
        let (x, unit) = (self.x, self.scaling == Scaling::Correlation);
        let (moments, mut lower) = cross::of_rows(x.values(), unit, self.weights.as_ref());
        checkpoint();
        let columns = Columns::checked(x, moments, self.scaling)?;
        let size = lower.diagonal().max();
        lower /= size;
        let Spectrum { roots, vectors } = spectrum::symmetric(lower)?;
        checkpoint();
        // Centring takes one dimension away: the last root is zero by construction.
        let roots = roots.rows(0, x.n_rows() - 1).into_owned();
        let trusted = is_trusted(&roots);
        if !(forced || trusted) {
            return self.by_singular_values(columns);
        }
        let mut tolerance = columns.tolerance(x, (roots[0] * size).sqrt());
        if !trusted {
            tolerance = tolerance.max(rounding_of_roots(&roots) * (size / self.divisor()));
        }
        let variances = roots.map(|root| root * (size / self.divisor()));
        let rank = rank(&variances, tolerance).min(x.n_cols());
        let singular = roots.rows(0, rank).map(|root| (root * size).sqrt());
        let mut left = first_columns(vectors, rank);
        let mut combination = left.clone();
        for (k, sigma) in singular.iter().enumerate() {
            left.column_mut(k).scale_mut(*sigma);
            combination.column_mut(k).scale_mut(1.0 / sigma);
        }
        let mut loadings = self.standardised(&columns).transposed_times(&combination);
        if !trusted {
            // What rounding did to vectors of small roots shows as lost perpendicularity.
            loadings = spectrum::orthonormal(loadings);
        }
        // Those of weighted rows carry the roots of the weights, which may be too small to divide
        // by.
        let scores = (trusted && self.weights.is_none()).then_some(left);
        Ok(Fitted {
            tolerance,
            variances: variances.rows(0, rank).into_owned(),
            columns,
            route: Route::RowCrossProduct,
            loadings,
            scores,
            approximation: None,
        })
    }

    pub(super) fn by_singular_values(&self, columns: Columns) -> Result<Fitted> {
        let x = self.x;
        let mut scaled = x.values().clone();
        for (j, mut column) in scaled.column_iter_mut().enumerate() {
            if columns.deviation[j] > 0.0 {
                column.add_scalar_mut(-columns.mean[j]);
                column /= columns.scale[j];
            } else {
                column.fill(0.0);
            }
        }
        if let Some(weights) = &self.weights {
            weights.weigh_rows(&mut scaled);
        }
        let (singular, loadings) = spectrum::singular(&scaled)?;
        checkpoint();
        let tolerance = columns.tolerance(x, singular[0]);
        let variances = singular.map(|sigma| sigma * (sigma / self.divisor()));
        let rank = rank(&variances, tolerance);
        if rank == 0 {
            return Err(Error::NoVariation { n_rows: x.n_rows() });
        }
        Ok(Fitted {
            tolerance,
            columns,
            route: Route::SingularValues,
            variances: variances.rows(0, rank).into_owned(),
            loadings: first_columns(loadings, rank),
            scores: None,
            approximation: None,
        })
    }

    pub(super) fn randomised(
        &self,
        keep: Option<usize>,
        options: RandomisedOptions,
    ) -> Result<Fitted> {
        let keep = keep.ok_or(Error::OptionNeeded {
            option: "keep",
            needed_by: "a randomised decomposition",
        })?;
        let columns = self.columns()?;
        let sketch = randomised::decompose(&self.standardised(&columns), keep, options)?;
        let tolerance = columns.tolerance(self.x, sketch.singular[0]);
        let variances = sketch.singular.map(|sigma| sigma * (sigma / self.divisor()));
        let rank = rank(&variances, tolerance);
        if rank < keep {
            return Err(Error::ComponentOutOfRange { asked: keep, available: rank });
        }
        Ok(Fitted {
            tolerance,
            columns,
            route: Route::Randomised,
            variances: variances.rows(0, keep).into_owned(),
            loadings: first_columns(sketch.right, keep),
            scores: self.weights.is_none().then(|| first_columns(sketch.image, keep)),
            approximation: Some(sketch.approximation),
        })
    }

    fn standardised<'a>(&'a self, columns: &'a Columns) -> Standardised<'a> {
        Standardised {
            x: self.x.values(),
            mean: &columns.mean,
            scale: &columns.scale,
            weights: self.weights.as_ref(),
        }
    }
}

fn is_trusted(roots: &DVector<f64>) -> bool {
    roots[roots.len() - 1] >= TRUSTED * roots[0]
}

/// What rounding may add to each root of a cross-product of this order.
fn rounding_of_roots(roots: &DVector<f64>) -> f64 {
    roots.len() as f64 * f64::EPSILON * roots[0]
}

/// How many variances, which are descending, exceed the tolerance.
fn rank(variances: &DVector<f64>, tolerance: f64) -> usize {
    variances.iter().take_while(|variance| **variance > tolerance).count()
}

/// The first columns of a matrix.
pub(super) fn first_columns(matrix: DMatrix<f64>, count: usize) -> DMatrix<f64> {
    if count == matrix.ncols() { matrix } else { matrix.columns(0, count).into_owned() }
}
