//! How much each row of a matrix counts.
//!
//! A row weight says how much a row matters beside the others: only ratios of weights have a
//! meaning, and analyses bring them to the sum n before use. Weighted means, cross-products and
//! what follows from them are then those of the usual formulas with each row taken w times, while
//! the divisor stays n − 1:
//!
//! ```text
//! x̄_j = Σ_i w_i x_ij / n,   c_jk = Σ_i w_i (x_ij − x̄_j)(x_ik − x̄_k) / (n − 1),   Σ_i w_i = n
//! ```
//!
//! So equal weights change nothing. Means, correlations, loadings and shares of variance are those
//! of a table in which a row of weight 2 stands twice. Covariances and variances are those of that
//! table but for one common factor, since its divisor counts the repeated rows as rows: two copies
//! of a measurement are not two measurements, and a divisor must not take them for such.
//!
//! Other programs choose other common factors: one minus the sum of squared weights of sum one,
//! in place of (n − 1) / n, makes the covariance unbiased when rows have equal variance.

use std::sync::Arc;

use super::matrix::DataMatrix;
use crate::error::{Error, Result};

impl DataMatrix {
    /// The same rows with a weight each: how much a row counts beside the others.
    ///
    /// Only ratios matter: weights 1, 2, 2 and 0.2, 0.4, 0.4 say the same, and equal weights say
    /// nothing. They replace earlier weights and follow their rows through
    /// [`select`](DataMatrix::select), [`select_rows`](DataMatrix::select_rows) and
    /// [`rows_where`](DataMatrix::rows_where). Analyses bring them to the sum n and keep the
    /// divisor n − 1:
    ///
    /// ```text
    /// x̄_j = Σ_i w_i x_ij / n,   c_jk = Σ_i w_i (x_ij − x̄_j)(x_ik − x̄_k) / (n − 1),   Σ_i w_i = n
    /// ```
    ///
    /// A row of weight 2 acts as two equal rows on means, correlations, loadings and shares of
    /// variance; covariances keep one common factor that comes from counting n rows, not more.
    ///
    /// ```
    /// use semiaxis::components::{Scaling, principal_components};
    /// use semiaxis::nalgebra::dmatrix;
    /// use semiaxis::table::DataMatrix;
    ///
    /// let x = DataMatrix::from_unnamed(dmatrix![1.0; 4.0; 5.0])?.with_weights([2.0, 1.0, 1.0])?;
    /// let pca = principal_components(&x, Scaling::Covariance)?;
    /// assert!((pca.mean()[0] - 2.75).abs() < 1e-12); // that of 1, 1, 4, 5
    /// # Ok::<(), semiaxis::Error>(())
    /// ```
    ///
    /// # Errors
    ///
    /// [`Error::ShapeMismatch`] unless there is one weight for each row; [`Error::BadWeight`]
    /// names the first row whose weight is not positive and finite.
    pub fn with_weights(&self, weights: impl IntoIterator<Item = f64>) -> Result<DataMatrix> {
        let weights: Arc<[f64]> = weights.into_iter().collect();
        if weights.len() != self.n_rows() {
            let (expected, found) = (self.n_rows(), weights.len());
            return Err(Error::ShapeMismatch { what: "weights of rows", expected, found });
        }
        match weights.iter().position(|weight| !(*weight > 0.0 && weight.is_finite())) {
            Some(row) => Err(Error::BadWeight {
                column: None,
                row: row + 1,
                label: self.labels()[row].clone(),
                value: weights[row],
            }),
            None => Ok(self.weighted_by(Some(weights))),
        }
    }

    /// The same rows without weights.
    pub fn without_weights(&self) -> DataMatrix {
        self.weighted_by(None)
    }

    /// The weights of the rows as they were given, in row order; `None` when none were.
    pub fn weights(&self) -> Option<&[f64]> {
        self.row_weights().as_deref()
    }

    /// The weights brought to the sum n, or `None` when they make no difference: because there
    /// are none, or all are equal.
    pub(crate) fn relative_weights(&self) -> Option<Vec<f64>> {
        let weights = self.weights()?;
        if weights.iter().all(|weight| *weight == weights[0]) {
            return None;
        }
        // Divided by the largest first, so that no sum overflows.
        let largest = weights.iter().fold(0.0, |largest: f64, weight| largest.max(*weight));
        let sum: f64 = weights.iter().map(|weight| weight / largest).sum();
        let factor = weights.len() as f64 / sum;
        Some(weights.iter().map(|weight| weight / largest * factor).collect())
    }
}

#[cfg(test)]
mod tests {
    use nalgebra::dmatrix;

    use super::*;
    use crate::compare::assert_relative;

    fn three() -> DataMatrix {
        let values = dmatrix![1.0, 2.0; 3.0, 5.0; 4.0, 4.0];
        DataMatrix::from_values(values, ["length", "width"], ["a", "b", "c"]).unwrap()
    }

    #[test]
    fn weights_follow_their_rows() {
        let x = three().with_weights([1.0, 2.0, 3.0]).unwrap();
        assert_eq!(x.select(["width"]).unwrap().weights(), Some(&[1.0, 2.0, 3.0][..]));
        assert_eq!(x.select_rows(["c", "a"]).unwrap().weights(), Some(&[3.0, 1.0][..]));
        let named = x.rows_where(|label| label != "a").unwrap();
        assert_eq!(named.weights(), Some(&[2.0, 3.0][..]));
        let relabelled = x.with_labels(["x", "y", "z"]).unwrap();
        assert_eq!(relabelled.weights(), x.weights());
        assert_eq!(x.without_weights().weights(), None);
        assert_eq!(three().weights(), None);
    }

    #[test]
    fn weights_are_brought_to_the_number_of_rows() {
        for size in [1.0, 1e-300, 1e300, 5e307] {
            let x = three().with_weights([1.0, 2.0, 3.0].map(|w| w * size)).unwrap();
            let weights = x.relative_weights().unwrap();
            for (weight, expected) in weights.iter().zip([0.5, 1.0, 1.5]) {
                assert_relative(*weight, expected, 1e-15, "weight");
            }
        }
        assert_eq!(three().with_weights([0.3; 3]).unwrap().relative_weights(), None);
        assert_eq!(three().relative_weights(), None);
    }

    #[test]
    fn what_is_no_weight_is_refused() {
        for bad in [0.0, -1.0, f64::NAN, f64::INFINITY] {
            match three().with_weights([1.0, bad, bad]) {
                Err(Error::BadWeight { row: 2, label, value, column: None }) => {
                    assert_eq!(label, "b");
                    assert!(value == bad || value.is_nan());
                }
                other => panic!("{other:?}"),
            }
        }
        assert!(matches!(
            three().with_weights([1.0]),
            Err(Error::ShapeMismatch { expected: 3, found: 1, .. })
        ));
    }
}
