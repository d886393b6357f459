//! The decomposition: which way is taken, and what is checked before and after.

use std::sync::{Arc, OnceLock};

use nalgebra::{DMatrix, DVector};

use super::cross::{self, CrossProduct, Moments, RowWeights};
use super::options::{Route, Scaling};
use super::result::PrincipalComponents;
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

/// Sums of squares beyond these cannot be multiplied and divided safely in double precision.
const LEAST_SQUARES: f64 = 1e-290;
const MOST_SQUARES: f64 = 1e290;

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
    if x.n_rows() < 2 {
        return Err(Error::TooFewRows {
            method: "principal components",
            needed: 2,
            found: x.n_rows(),
        });
    }
    let weights = RowWeights::of(x);
    let fitted = if x.n_cols() < x.n_rows() {
        by_variables(x, scaling, weights.as_ref())
    } else {
        by_rows(x, scaling, weights.as_ref())
    }?;
    Ok(fitted.into_result(x, scaling, weights))
}

/// What every way of decomposing hands over.
struct Fitted {
    columns: Columns,
    route: Route,
    tolerance: f64,
    variances: DVector<f64>,
    loadings: DMatrix<f64>,
    scores: Option<DMatrix<f64>>,
}

/// Centre, spread and scale of the columns.
struct Columns {
    mean: DVector<f64>,
    deviation: DVector<f64>,
    scale: DVector<f64>,
}

impl Columns {
    /// Checks the spread of each column and derives its scale.
    fn checked(x: &DataMatrix, moments: Moments, scaling: Scaling) -> Result<Self> {
        let divisor = (x.n_rows() - 1) as f64;
        let Moments { mean, sum_squares } = moments;
        let mut deviation = sum_squares.map(|squares| (squares / divisor).sqrt());
        let mut constant = Vec::new();
        for (j, &squares) in sum_squares.iter().enumerate() {
            // The cheap test picks out the few columns that need the exact one.
            let rounding = 16.0 * f64::EPSILON * mean[j].abs();
            let suspect = squares <= rounding * rounding * x.n_rows() as f64;
            if !suspect && (LEAST_SQUARES..=MOST_SQUARES).contains(&squares) {
                continue;
            }
            let column = x.values().column(j);
            let (min, max) = (column.min(), column.max());
            if max - min <= 2.0 * f64::EPSILON * min.abs().max(max.abs()) {
                deviation[j] = 0.0;
                constant.push((x.variables()[j].clone(), column[0]));
            } else if !(LEAST_SQUARES..=MOST_SQUARES).contains(&squares) {
                return Err(Error::Magnitude {
                    column: x.variables()[j].clone(),
                    value: (max / 2.0 - min / 2.0) * 2.0,
                    least: LEAST_SQUARES.sqrt(),
                    most: MOST_SQUARES.sqrt(),
                });
            }
        }
        if constant.len() == x.n_cols() {
            return Err(Error::NoVariation { n_rows: x.n_rows() });
        }
        let scale = match scaling {
            Scaling::Covariance => DVector::repeat(x.n_cols(), 1.0),
            Scaling::Correlation if constant.is_empty() => deviation.clone(),
            Scaling::Correlation => return Err(Error::ConstantColumns { columns: constant }),
        };
        Ok(Columns { mean, deviation, scale })
    }

    fn varies_throughout(&self) -> bool {
        self.deviation.iter().all(|deviation| *deviation > 0.0)
    }
}

fn by_variables(x: &DataMatrix, scaling: Scaling, weights: Option<&RowWeights>) -> Result<Fitted> {
    let n = x.n_rows();
    let CrossProduct { mean, mut lower } = cross::of_columns(x.values(), weights);
    checkpoint();
    let sum_squares = lower.diagonal();
    let columns = Columns::checked(x, Moments { mean, sum_squares: sum_squares.clone() }, scaling)?;
    if columns.varies_throughout() {
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
        if roots[roots.len() - 1] >= TRUSTED * roots[0] {
            let variances = match scaling {
                Scaling::Correlation => roots,
                Scaling::Covariance => roots * (sum_squares.max() / (n - 1) as f64),
            };
            return Ok(Fitted {
                tolerance: tolerance(x, &columns, (variances[0] * (n - 1) as f64).sqrt()),
                columns,
                route: Route::VariableCrossProduct,
                variances,
                loadings: vectors,
                scores: None,
            });
        }
    }
    by_singular_values(x, columns, weights)
}

fn by_rows(x: &DataMatrix, scaling: Scaling, weights: Option<&RowWeights>) -> Result<Fitted> {
    let n = x.n_rows();
    let (moments, mut lower) = cross::of_rows(x.values(), scaling == Scaling::Correlation, weights);
    checkpoint();
    let columns = Columns::checked(x, moments, scaling)?;
    let size = lower.diagonal().max();
    lower /= size;
    let Spectrum { roots, vectors } = spectrum::symmetric(lower)?;
    checkpoint();
    // Centring takes one dimension away: the last root is zero by construction.
    let rank = n - 1;
    if roots[rank - 1] < TRUSTED * roots[0] {
        return by_singular_values(x, columns, weights);
    }
    let singular = roots.rows(0, rank).map(|root| (root * size).sqrt());
    let mut left = vectors.columns(0, rank).into_owned();
    let mut combination = left.clone();
    for (k, sigma) in singular.iter().enumerate() {
        left.column_mut(k).scale_mut(*sigma);
        combination.column_mut(k).scale_mut(1.0 / sigma);
    }
    if let Some(weights) = weights {
        weigh_rows(&mut combination, weights);
    }
    let loadings =
        super::scores::combine_rows(x.values(), &columns.mean, &columns.scale, &combination);
    Ok(Fitted {
        tolerance: tolerance(x, &columns, singular[0]),
        variances: singular.map(|sigma| sigma * sigma / rank as f64),
        columns,
        route: Route::RowCrossProduct,
        loadings,
        // Those of weighted rows carry the roots of the weights, which may be too small to divide by.
        scores: weights.is_none().then_some(left),
    })
}

/// Multiplies each row by the root of its weight.
fn weigh_rows(matrix: &mut DMatrix<f64>, weights: &RowWeights) {
    for mut column in matrix.column_iter_mut() {
        column.iter_mut().zip(weights.roots()).for_each(|(value, root)| *value *= root);
    }
}

fn by_singular_values(
    x: &DataMatrix,
    columns: Columns,
    weights: Option<&RowWeights>,
) -> Result<Fitted> {
    let n = x.n_rows();
    let mut scaled = x.values().clone();
    for (j, mut column) in scaled.column_iter_mut().enumerate() {
        if columns.deviation[j] > 0.0 {
            column.add_scalar_mut(-columns.mean[j]);
            column /= columns.scale[j];
        } else {
            column.fill(0.0);
        }
    }
    if let Some(weights) = weights {
        weigh_rows(&mut scaled, weights);
    }
    let (singular, mut loadings) = spectrum::singular(&scaled)?;
    checkpoint();
    let tolerance = tolerance(x, &columns, singular[0]);
    let variances = singular.map(|sigma| sigma * (sigma / (n - 1) as f64));
    let rank = variances.iter().take_while(|variance| **variance > tolerance).count();
    if rank == 0 {
        return Err(Error::NoVariation { n_rows: n });
    }
    loadings = loadings.columns(0, rank).into_owned();
    Ok(Fitted {
        tolerance,
        columns,
        route: Route::SingularValues,
        variances: variances.rows(0, rank).into_owned(),
        loadings,
        scores: None,
    })
}

/// The variance that a component must exceed; see [`PrincipalComponents::rank`].
fn tolerance(x: &DataMatrix, columns: &Columns, largest_singular: f64) -> f64 {
    let (n, p) = (x.n_rows(), x.n_cols());
    // |mean| + √n times the deviation bounds the largest absolute value without another pass.
    let reach = columns
        .mean
        .iter()
        .zip(columns.deviation.iter().zip(columns.scale.iter()))
        .map(|(mean, (deviation, scale))| (mean.abs() + deviation) / scale)
        .fold(0.0, f64::max);
    let decomposition = n.max(p) as f64 * largest_singular;
    let data = ((n * p) as f64).sqrt() * reach;
    let least = f64::EPSILON * decomposition.max(data);
    least * (least / (n - 1) as f64)
}

impl Fitted {
    fn into_result(
        mut self,
        x: &DataMatrix,
        scaling: Scaling,
        weights: Option<RowWeights>,
    ) -> PrincipalComponents {
        for k in 0..self.loadings.ncols() {
            if spectrum::sign(self.loadings.column(k).as_slice()) < 0.0 {
                self.loadings.column_mut(k).neg_mut();
                if let Some(scores) = &mut self.scores {
                    scores.column_mut(k).neg_mut();
                }
            }
        }
        let names: Arc<[String]> = (1..=self.loadings.ncols()).map(|k| format!("PC{k}")).collect();
        let named = |values, rows| {
            NamedMatrix::new(values, rows, names.clone()).expect("one name for each column")
        };
        let total_variance = match scaling {
            Scaling::Correlation => x.n_cols() as f64,
            Scaling::Covariance => self.columns.deviation.iter().map(|d| d * d).sum(),
        };
        PrincipalComponents {
            data: x.clone(),
            weights: weights.map(|weights| weights.weights().into()),
            scaling,
            route: self.route,
            tolerance: self.tolerance,
            mean: self.columns.mean,
            scale: self.columns.scale,
            deviation: self.columns.deviation,
            variances: self.variances,
            total_variance,
            loadings: named(self.loadings, x.shared_variables()),
            scores: match self.scores {
                Some(scores) => OnceLock::from(named(scores, x.shared_labels())),
                None => OnceLock::new(),
            },
        }
    }
}
