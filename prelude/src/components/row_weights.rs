//! Weights of rows, ready for sums over rows.

use nalgebra::DMatrix;

use super::cross::{Centre, sum};
use crate::table::DataMatrix;

/// How much each row counts, for sums over rows.
///
/// Products take each row times the root of its weight, so that a product of two rows carries the
/// weight itself; means are weighted ones.
#[derive(Clone)]
pub(crate) struct RowWeights {
    // One per row, positive, of sum n.
    weights: Vec<f64>,
    roots: Vec<f64>,
}

impl RowWeights {
    /// Those of a matrix that make a difference.
    pub(crate) fn of(x: &DataMatrix) -> Option<Self> {
        let weights = x.relative_weights()?;
        let roots = weights.iter().map(|weight| weight.sqrt()).collect();
        Some(RowWeights { weights, roots })
    }

    /// The weights, of sum n.
    pub(crate) fn weights(&self) -> &[f64] {
        &self.weights
    }

    /// Their square roots.
    pub(super) fn roots(&self) -> &[f64] {
        &self.roots
    }

    /// Multiplies each row by the root of its weight.
    pub(crate) fn weigh_rows(&self, matrix: &mut DMatrix<f64>) {
        for mut column in matrix.column_iter_mut() {
            column.iter_mut().zip(&self.roots).for_each(|(value, root)| *value *= root);
        }
    }

    /// Writes the deviations of a piece of a column, whose rows begin at `first`, from its rounded
    /// mean, times the roots of the weights, and returns the mean.
    pub(super) fn centre_into(&self, column: &[f64], centred: &mut [f64], first: usize) -> Centre {
        let rows = first..first + column.len();
        let (weights, roots) = (&self.weights[rows.clone()], &self.roots[rows]);
        for ((product, value), weight) in centred.iter_mut().zip(column).zip(weights) {
            *product = value * weight;
        }
        let total = sum(weights);
        let rounded = sum(centred) / total;
        for ((product, value), weight) in centred.iter_mut().zip(column).zip(weights) {
            *product = (value - rounded) * weight;
        }
        let left = sum(centred) / total;
        for ((deviation, value), root) in centred.iter_mut().zip(column).zip(roots) {
            *deviation = (value - rounded) * root;
        }
        Centre { rounded, left }
    }
}
