//! Correlations looked at before components are.

use nalgebra::{DMatrix, DVector};

use super::normality::normality_of;
use super::result::{Adequacy, SphericityTest};
use crate::components::{PrincipalComponents, Scaling, principal_components};
use crate::distributions::chi_squared_upper_tail;
use crate::error::{Error, Result};
use crate::table::{DataMatrix, NamedMatrix};

const METHOD: &str = "the adequacy of correlations";

/// Whether variables hang together enough to be analysed together, and whether rows look normal.
///
/// ```text
/// χ² = −(n − 1 − (2p + 5) / 6) ln |R|,  p (p − 1) / 2 degrees of freedom        (Bartlett 1951)
/// q_ij = −s_ij / √(s_ii s_jj),  S = R⁻¹
/// measure = Σ r² / (Σ r² + Σ q²)  over all pairs, or over those of one variable    (Kaiser 1974)
/// ```
///
/// The tests of normality look at all pairs of rows: n² p operations.
///
/// ```
/// use semiaxis::adequacy::adequacy;
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::table::DataMatrix;
///
/// let x = dmatrix![1.0, 1.2; 2.0, 1.9; 3.0, 3.3; 4.0, 3.8; 5.0, 5.1; 6.0, 5.7];
/// let found = adequacy(&DataMatrix::from_unnamed(x)?)?;
/// // Two variables have nothing to share with others: the measure is one half.
/// assert!((found.overall() - 0.5).abs() < 1e-12);
/// assert!(found.sphericity().p_value < 0.01);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::TooFewColumns`] for one variable; [`Error::TooFewRows`] unless n > p + 1;
/// [`Error::SingularScatter`] with the rank when variables can be computed from others;
/// [`Error::WeightsNotCovered`]; [`Error::ConstantColumns`]; [`Error::Interrupted`].
pub fn adequacy(x: &DataMatrix) -> Result<Adequacy> {
    if x.n_cols() < 2 {
        return Err(Error::TooFewColumns { method: METHOD, needed: 2, found: x.n_cols() });
    }
    let pca = full_rank_components(x, METHOD)?;
    let normality = normality_of(&pca)?;
    let (roots, vectors) = (pca.variances(), pca.loadings().values());
    let (n, p) = (x.n_rows() as f64, x.n_cols() as f64);
    let ln_determinant: f64 = roots.iter().map(|root| root.ln()).sum();
    let statistic = -(n - 1.0 - (2.0 * p + 5.0) / 6.0) * ln_determinant;
    let freedom = 0.5 * p * (p - 1.0);
    let correlations = from_roots(roots, vectors);
    let inverse = from_roots(&roots.map(|root| 1.0 / root), vectors);
    let partial = DMatrix::from_fn(inverse.nrows(), inverse.ncols(), |i, j| {
        if i == j { 1.0 } else { -inverse[(i, j)] / (inverse[(i, i)] * inverse[(j, j)]).sqrt() }
    });
    // Both matrices have ones on the diagonal, which do not count.
    let shared = |column: usize, of: &DMatrix<f64>| {
        let others = (0..of.nrows()).filter(|&other| other != column);
        others.map(|other| of[(other, column)].powi(2)).sum::<f64>()
    };
    let plain = DVector::from_fn(x.n_cols(), |j, _| shared(j, &correlations));
    let given_others = DVector::from_fn(x.n_cols(), |j, _| shared(j, &partial));
    Ok(Adequacy {
        sphericity: SphericityTest {
            statistic,
            freedom,
            p_value: chi_squared_upper_tail(statistic, freedom),
        },
        overall: plain.sum() / (plain.sum() + given_others.sum()),
        by_variable: plain.zip_map(&given_others, |r, q| r / (r + q)),
        partial_correlations: NamedMatrix::new(partial, x.variables(), x.variables())?,
        ln_determinant,
        condition_number: roots[0] / roots[roots.len() - 1],
        normality,
    })
}

/// Components of a correlation matrix that has an inverse.
pub(super) fn full_rank_components(
    x: &DataMatrix,
    method: &'static str,
) -> Result<PrincipalComponents> {
    let (n, p) = (x.n_rows(), x.n_cols());
    if n < p + 2 {
        return Err(Error::TooFewRows { method, needed: p + 2, found: n });
    }
    let pca = principal_components(x, Scaling::Correlation)?;
    if pca.row_weights().is_some() {
        return Err(Error::WeightsNotCovered { method });
    }
    if pca.rank() < p {
        return Err(Error::SingularScatter { method, rank: pca.rank(), order: p });
    }
    Ok(pca)
}

/// V diag(roots) Vᵀ.
fn from_roots(roots: &DVector<f64>, vectors: &DMatrix<f64>) -> DMatrix<f64> {
    let mut scaled = vectors.clone();
    for (mut column, root) in scaled.column_iter_mut().zip(roots.iter()) {
        column *= *root;
    }
    scaled * vectors.transpose()
}
