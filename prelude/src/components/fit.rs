//! The decomposition: what is asked for, and what is handed back.

use std::sync::{Arc, OnceLock};

use super::fitted::FittedComponents;
use super::options::{ComponentOptions, Decomposition, Scaling};
use super::result::PrincipalComponents;
use super::row_weights::RowWeights;
use super::spectrum;
use super::ways::{Fitted, Task, first_columns};
use crate::error::{Error, Result};
use crate::table::{DataMatrix, NamedMatrix};

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

impl Task<'_> {
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
                transformations: x.transformations().into(),
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
