//! From varimax to promax: a least-squares fit to loadings raised to a power.

use nalgebra::DMatrix;

use crate::error::{Error, Result};

/// The oblique rotation matrix T; `turn` is the varimax one for the same loadings.
///
/// With X = A turn and U as at [`Promax`](super::Rotation::Promax), the pattern is A turn U, so
/// that T = ((turn U)⁻¹)ᵀ, and the scaling of U gives the columns of T unit length.
pub(super) fn oblique(
    loadings: &DMatrix<f64>,
    turn: &DMatrix<f64>,
    power: f64,
) -> Result<DMatrix<f64>> {
    let simple = loadings * turn;
    let target = simple.map(|value| value.abs().powf(power).copysign(value));
    let k = turn.ncols();
    let dependent = || Error::DependentColumns { what: "the loadings", rank: k - 1, n_cols: k };
    let gram = simple.transpose() * &simple;
    let fit = gram.cholesky().ok_or_else(dependent)?.solve(&(simple.transpose() * target));
    let mut turn = (turn * fit).try_inverse().ok_or_else(dependent)?.transpose();
    for mut column in turn.column_iter_mut() {
        let length = column.norm();
        column /= length;
    }
    Ok(turn)
}
