//! Products of long matrices, cut by rows.

use faer::linalg::matmul::matmul;
use faer::{Accum, MatRef, Par};
use nalgebra::{DMatrix, DVector};
use rayon::prelude::*;

use super::views::{PIECES, view, view_mut};

/// Doubles in a block of centred rows.
const BLOCK: usize = 48 << 10;

/// The coordinates of rows along loadings, after centring and scaling.
///
/// Rows are centred before they are multiplied, block by block: taking the mean's coordinates off
/// afterwards would lose the digits of a large common offset.
pub(crate) fn project_rows(
    x: &DMatrix<f64>,
    mean: &DVector<f64>,
    scale: &DVector<f64>,
    loadings: &DMatrix<f64>,
) -> DMatrix<f64> {
    let (n, p) = x.shape();
    let mut scores = DMatrix::zeros(n, loadings.ncols());
    let block = (BLOCK / p).clamp(64, 4096);
    let unscaled = scale.iter().all(|scale| *scale == 1.0);
    view_mut(&mut scores).par_row_chunks_mut(block).enumerate().for_each_init(
        || vec![0.0; block * p],
        |buffer, (place, target)| {
            let (first, n_rows) = (place * block, target.nrows());
            let buffer = &mut buffer[..n_rows * p];
            for (j, centred) in buffer.chunks_mut(n_rows).enumerate() {
                let column = &x.as_slice()[j * n + first..][..n_rows];
                let (mean, scale) = (mean[j], scale[j]);
                for (deviation, value) in centred.iter_mut().zip(column) {
                    *deviation = value - mean;
                }
                if !unscaled {
                    centred.iter_mut().for_each(|deviation| *deviation /= scale);
                }
            }
            let rows = MatRef::from_column_major_slice(buffer, n_rows, p);
            matmul(target, Accum::Replace, rows, view(loadings), 1.0, Par::Seq);
        },
    );
    scores
}

/// The product of a matrix with the transpose of another.
pub(crate) fn product(a: &DMatrix<f64>, b: &DMatrix<f64>) -> DMatrix<f64> {
    let mut result = DMatrix::zeros(a.nrows(), b.nrows());
    let into = view_mut(&mut result);
    matmul(into, Accum::Replace, view(a), view(b).transpose(), 1.0, PIECES);
    result
}

/// The centred and scaled columns combined with weights on the rows: p × r.
pub(super) fn combine_rows(
    x: &DMatrix<f64>,
    mean: &DVector<f64>,
    scale: &DVector<f64>,
    weights: &DMatrix<f64>,
) -> DMatrix<f64> {
    let (n, p) = x.shape();
    let mut combined = DMatrix::zeros(p, weights.ncols());
    let block = (BLOCK / n).clamp(64, 4096);
    view_mut(&mut combined).par_row_chunks_mut(block).enumerate().for_each_init(
        || vec![0.0; block * n],
        |buffer, (place, target)| {
            let (first, n_cols) = (place * block, target.nrows());
            let buffer = &mut buffer[..n * n_cols];
            for (k, centred) in buffer.chunks_mut(n).enumerate() {
                let j = first + k;
                let (mean, scale) = (mean[j], scale[j]);
                for (deviation, value) in centred.iter_mut().zip(&x.as_slice()[j * n..][..n]) {
                    *deviation = (value - mean) / scale;
                }
            }
            let columns = MatRef::from_column_major_slice(buffer, n, n_cols);
            matmul(target, Accum::Replace, columns.transpose(), view(weights), 1.0, Par::Seq);
        },
    );
    combined
}
