//! Squared multiple correlations on the diagonal of a correlation matrix.

use faer::dyn_stack::MemBuffer;
use nalgebra::{DMatrix, DVector};

use crate::components::PrincipalComponents;
use crate::components::spectrum::{roots_workspace, symmetric_roots};
use crate::error::{Error, Result};

const METHOD: &str = "parallel analysis of reduced correlations";

/// The roots of the reduced correlation matrix of an analysis of correlations, descending.
pub(super) fn reduced_roots(pca: &PrincipalComponents) -> Result<DVector<f64>> {
    let p = pca.n_variables();
    if pca.n_components() < p {
        let rank = pca.n_components();
        return Err(Error::SingularScatter { method: METHOD, rank, order: p });
    }
    let structure = pca.structure();
    let mut correlation = structure.values() * structure.values().transpose();
    Reduction::new(p).apply(&mut correlation)?;
    let mut ascending = vec![0.0; p];
    let mut scratch: MemBuffer = roots_workspace(p);
    symmetric_roots(&correlation, &mut ascending, &mut scratch)?;
    Ok(DVector::from_iterator(p, ascending.into_iter().rev()))
}

/// Memory for reducing matrices of one order.
pub(super) struct Reduction {
    /// The lower Cholesky factor; what stands above the diagonal means nothing.
    lower: DMatrix<f64>,
    /// One column of its inverse.
    column: Vec<f64>,
}

impl Reduction {
    pub(super) fn new(order: usize) -> Self {
        Reduction { lower: DMatrix::zeros(order, order), column: vec![0.0; order] }
    }

    /// Puts squared multiple correlations on the diagonal of a correlation matrix of which the
    /// lower triangle is filled: 1 − 1/r^jj with r^jj the diagonal of the inverse (L. Guttman
    /// (1953), "Image theory for the structure of quantitative variates", Psychometrika 18,
    /// 277–296).
    pub(super) fn apply(&mut self, correlation: &mut DMatrix<f64>) -> Result<()> {
        let p = correlation.nrows();
        let Reduction { lower, column } = self;
        lower.copy_from(correlation);
        for j in 0..p {
            for k in 0..j {
                let part = lower[(j, k)];
                for i in j..p {
                    lower[(i, j)] -= part * lower[(i, k)];
                }
            }
            let pivot = lower[(j, j)];
            if !(pivot > f64::EPSILON * p as f64) {
                return Err(Error::SingularScatter { method: METHOD, rank: j, order: p });
            }
            let root = pivot.sqrt();
            lower.column_mut(j).rows_range_mut(j..).scale_mut(1.0 / root);
        }
        // Column by column of the inverse, by forward substitution; its squares sum to r^jj.
        for j in 0..p {
            column.fill(0.0);
            column[j] = 1.0;
            let mut sum = 0.0;
            for i in j..p {
                let value = column[i] / lower[(i, i)];
                sum += value * value;
                for below in i + 1..p {
                    column[below] -= value * lower[(below, i)];
                }
            }
            correlation[(j, j)] = 1.0 - 1.0 / sum;
        }
        Ok(())
    }
}
