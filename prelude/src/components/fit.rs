//! The decomposition: which way is taken, and what is checked before and after.

use std::sync::{Arc, OnceLock};

use nalgebra::{DMatrix, DVector};

use super::columns::Columns;
use super::cross::{self, CrossProduct, Moments, RowWeights};
use super::fitted::FittedComponents;
use super::options::{ComponentOptions, Decomposition, Route, Scaling};
use super::randomised::{self, Approximation};
use super::result::PrincipalComponents;
use super::scores::Standardised;
use super::spectrum::{self, Spectrum};
use crate::error::{Error, Result};
use crate::live::checkpoint;
use crate::table::{DataMatrix, NamedMatrix};

/// A cross-product is trusted while its smallest root is at least this share of its largest.
///
/// Squaring the data squares their condition number: a root λₖ of a cross-product carries a
/// relative error of about ε λ₁/λₖ (G. H. Golub and C. F. Van Loan (2013), "Matrix Computations",
/// 4th edition, sections 8.1.2 and 8.6), here at most some 2e-11. Below it the data themselves
/// are decomposed.
const TRUSTED: f64 = 1e-5;

/// The principal components of a matrix.
///
/// Rows are observations, columns are variables; the divisor is n − 1. The cost is that of one
/// symmetric product (n p min(n, p) operations) in the usual case. Neither rows nor variables
/// need outnumber the other. Results do not depend on the number of threads. Row weights count as
/// [`DataMatrix::with_weights`] says.
///
/// ```
/// use semiaxis::components::{Scaling, principal_components};
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::table::DataMatrix;
///
/// // Two variables with correlation r have the roots 1 + r and 1 − r.
/// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
/// let pca = principal_components(&x, Scaling::Correlation)?;
/// assert!((pca.variances()[0] - 1.5).abs() < 1e-12);
/// assert!((pca.proportions()[0] - 0.75).abs() < 1e-12);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::TooFewRows`] for fewer than two rows; [`Error::ConstantColumns`] under
/// [`Scaling::Correlation`] for columns whose values are equal to within rounding;
/// [`Error::NoVariation`] when no column varies; [`Error::Magnitude`] for deviations too large or
/// too small to square.
pub fn principal_components(x: &DataMatrix, scaling: Scaling) -> Result<PrincipalComponents> {
    principal_components_with(x, ComponentOptions::new(scaling))
}

/// The principal components of a matrix, with a choice of how many are kept and of the way they
/// are computed.
///
/// ```
/// use semiaxis::components::{ComponentOptions, Route, Scaling, principal_components_with};
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::table::DataMatrix;
///
/// let x = DataMatrix::from_unnamed(dmatrix![1.0, 1.0; 2.0, 3.0; 3.0, 2.0])?;
/// let first = principal_components_with(&x, ComponentOptions::new(Scaling::Correlation).keep(1))?;
/// assert_eq!((first.n_components(), first.rank()), (1, 2));
/// assert!((first.total_variance() - 2.0).abs() < 1e-12); // still that of everything
/// assert!((first.left_out_variance() - 0.5).abs() < 1e-12);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// Those of [`principal_components`]; [`Error::ComponentOutOfRange`] when more components are to
/// be kept than there are; [`Error::OptionOutOfRange`], and [`Error::OptionNeeded`] for a
/// randomised decomposition that is not told how many to keep.
pub fn principal_components_with(
    x: &DataMatrix,
    options: ComponentOptions,
) -> Result<PrincipalComponents> {
    let method = "principal components";
    if x.n_rows() < 2 {
        return Err(Error::TooFewRows { method, needed: 2, found: x.n_rows() });
    }
    options.check((x.n_rows() - 1).min(x.n_cols()))?;
    let task = Task { x, scaling: options.scaling(), weights: RowWeights::of(x) };
    let fitted = match options.chosen_decomposition() {
        Decomposition::Automatic if x.n_cols() < x.n_rows() => task.by_variables(false),
        Decomposition::Automatic => task.by_rows(false),
        Decomposition::VariableCrossProduct => task.by_variables(true),
        Decomposition::RowCrossProduct => task.by_rows(true),
        Decomposition::SingularValues => task.by_singular_values(task.columns()?),
        Decomposition::Randomised(chosen) => task.randomised(options.chosen_keep(), chosen),
    }?;
    task.result(fitted, options.chosen_keep())
}

/// What is to be decomposed.
struct Task<'a> {
    x: &'a DataMatrix,
    scaling: Scaling,
    weights: Option<RowWeights>,
}

/// What every way of decomposing hands over.
struct Fitted {
    columns: Columns,
    route: Route,
    tolerance: f64,
    variances: DVector<f64>,
    loadings: DMatrix<f64>,
    scores: Option<DMatrix<f64>>,
    approximation: Option<Approximation>,
}

impl Task<'_> {
    fn divisor(&self) -> f64 {
        (self.x.n_rows() - 1) as f64
    }

    fn columns(&self) -> Result<Columns> {
        let moments = cross::moments(self.x.values(), self.weights.as_ref());
        checkpoint();
        Columns::checked(self.x, moments, self.scaling)
    }

    fn by_variables(&self, forced: bool) -> Result<Fitted> {
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

    fn by_rows(&self, forced: bool) -> Result<Fitted> {
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

    fn by_singular_values(&self, columns: Columns) -> Result<Fitted> {
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

    fn randomised(&self, keep: Option<usize>, options: super::RandomisedOptions) -> Result<Fitted> {
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

    fn result(self, mut fitted: Fitted, keep: Option<usize>) -> Result<PrincipalComponents> {
        let (x, rank) = (self.x, fitted.variances.len());
        let kept = keep.unwrap_or(rank);
        if kept > rank {
            return Err(Error::ComponentOutOfRange { asked: kept, available: rank });
        }
        let mut loadings = first_columns(fitted.loadings, kept);
        let mut scores = fitted.scores.map(|scores| first_columns(scores, kept));
        for k in 0..kept {
            if spectrum::sign(loadings.column(k).as_slice()) < 0.0 {
                loadings.column_mut(k).neg_mut();
                if let Some(scores) = &mut scores {
                    scores.column_mut(k).neg_mut();
                }
            }
        }
        let names: Arc<[String]> = (1..=kept).map(|k| format!("PC{k}")).collect();
        let named = |values, rows| {
            NamedMatrix::new(values, rows, names.clone()).expect("one name for each column")
        };
        let total_variance = match self.scaling {
            Scaling::Correlation => x.n_cols() as f64,
            Scaling::Covariance => fitted.columns.deviation.iter().map(|d| d * d).sum(),
        };
        fitted.variances = fitted.variances.rows(0, kept).into_owned();
        Ok(PrincipalComponents {
            data: x.clone(),
            fitted: FittedComponents {
                scaling: self.scaling,
                route: fitted.route,
                approximation: fitted.approximation,
                n_rows: x.n_rows(),
                is_weighted: self.weights.is_some(),
                rank,
                tolerance: fitted.tolerance,
                mean: fitted.columns.mean,
                scale: fitted.columns.scale,
                deviation: fitted.columns.deviation,
                variances: fitted.variances,
                total_variance,
                loadings: named(loadings, x.shared_variables()),
                saved_scores: None,
            },
            weights: self.weights.map(|weights| weights.weights().into()),
            scores: match scores {
                Some(scores) => OnceLock::from(named(scores, x.shared_labels())),
                None => OnceLock::new(),
            },
        })
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

fn first_columns(matrix: DMatrix<f64>, count: usize) -> DMatrix<f64> {
    if count == matrix.ncols() { matrix } else { matrix.columns(0, count).into_owned() }
}
