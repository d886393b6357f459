//! Products with long matrices, cut by rows or columns, that centre and scale on the way.

use faer::linalg::matmul::matmul;
use faer::{Accum, MatRef, Par};
use nalgebra::{DMatrix, DVector};
use rayon::prelude::*;

use super::row_weights::RowWeights;
use super::views::{PIECES, view, view_mut};
use crate::live::interrupted;

/// Doubles in a block of centred values.
const BLOCK: usize = 48 << 10;

/// The most parts that a product summed over rows is summed in.
const MOST_PARTS: usize = 16;

/// Up to this many rows, columns are taken whole.
const SHORT: usize = 4096;

/// The data centred, scaled and with rows times the roots of their weights, as something that
/// multiplies: the matrix itself is never formed, only blocks of it.
///
/// Values are centred before they are multiplied: taking the mean's part off afterwards would lose
/// the digits of a large common offset. After an interrupt products are left unfinished; whoever
/// asked for one has to call `checkpoint` before using it.
pub(crate) struct Standardised<'a> {
    pub(crate) x: &'a DMatrix<f64>,
    pub(crate) mean: &'a DVector<f64>,
    pub(crate) scale: &'a DVector<f64>,
    pub(crate) weights: Option<&'a RowWeights>,
}

impl Standardised<'_> {
    /// The number of rows and of columns.
    pub(super) fn shape(&self) -> (usize, usize) {
        self.x.shape()
    }

    /// The product with a matrix that has a row for each variable: n × r.
    pub(super) fn times(&self, right: &DMatrix<f64>) -> DMatrix<f64> {
        let mut product = project_rows(self.x, self.mean, self.scale, right, interrupted);
        if let Some(weights) = self.weights {
            weights.weigh_rows(&mut product);
        }
        product
    }

    /// The product of the transpose with a matrix that has a row for each row: p × r.
    pub(crate) fn transposed_times(&self, left: &DMatrix<f64>) -> DMatrix<f64> {
        let weighted = self.weights.map(|weights| {
            let mut weighted = left.clone();
            weights.weigh_rows(&mut weighted);
            weighted
        });
        let left = weighted.as_ref().unwrap_or(left);
        if self.x.nrows() <= SHORT { self.combine_columns(left) } else { self.combine_rows(left) }
    }

    /// Whole columns at a time.
    fn combine_columns(&self, left: &DMatrix<f64>) -> DMatrix<f64> {
        let (n, p) = self.x.shape();
        let mut combined = DMatrix::zeros(p, left.ncols());
        let block = (BLOCK / n).clamp(64, 4096).min(p);
        view_mut(&mut combined).par_row_chunks_mut(block).enumerate().for_each_init(
            || vec![0.0; block * n],
            |buffer, (place, target)| {
                if interrupted() {
                    return;
                }
                let (first, n_cols) = (place * block, target.nrows());
                let buffer = &mut buffer[..n * n_cols];
                for (k, centred) in buffer.chunks_mut(n).enumerate() {
                    let j = first + k;
                    let (mean, scale) = (self.mean[j], self.scale[j]);
                    let column = &self.x.as_slice()[j * n..][..n];
                    for (deviation, value) in centred.iter_mut().zip(column) {
                        *deviation = (value - mean) / scale;
                    }
                }
                let columns = MatRef::from_column_major_slice(buffer, n, n_cols);
                matmul(target, Accum::Replace, columns.transpose(), view(left), 1.0, Par::Seq);
            },
        );
        combined
    }

    /// Blocks of rows, summed in parts that depend on the shape only.
    fn combine_rows(&self, left: &DMatrix<f64>) -> DMatrix<f64> {
        let (n, p) = self.x.shape();
        let block = (BLOCK / p).clamp(64, 4096).min(n);
        let n_blocks = n.div_ceil(block);
        let blocks_per_part = n_blocks.div_ceil(MOST_PARTS);
        let parts: Vec<DMatrix<f64>> = (0..n_blocks.div_ceil(blocks_per_part))
            .into_par_iter()
            .map(|part| {
                let mut sum = DMatrix::zeros(p, left.ncols());
                let mut buffer = vec![0.0; block * p];
                let from = part * blocks_per_part;
                for place in from..(from + blocks_per_part).min(n_blocks) {
                    if interrupted() {
                        break;
                    }
                    let first = place * block;
                    let n_rows = block.min(n - first);
                    let buffer = &mut buffer[..n_rows * p];
                    centre_block(self.x, self.mean, self.scale, first, n_rows, buffer);
                    let rows = MatRef::from_column_major_slice(buffer, n_rows, p);
                    let left = view(left).subrows(first, n_rows);
                    let into = view_mut(&mut sum);
                    matmul(into, Accum::Add, rows.transpose(), left, 1.0, Par::Seq);
                }
                sum
            })
            .collect();
        let mut parts = parts.into_iter();
        let mut total = parts.next().expect("at least one part, since there is at least one row");
        for part in parts {
            total += part;
        }
        total
    }
}

/// The coordinates of rows along loadings, after centring and scaling; blocks that are not begun
/// when `stop` holds stay zero.
pub(crate) fn project_rows(
    x: &DMatrix<f64>,
    mean: &DVector<f64>,
    scale: &DVector<f64>,
    loadings: &DMatrix<f64>,
    stop: impl Fn() -> bool + Sync,
) -> DMatrix<f64> {
    let (n, p) = x.shape();
    let mut scores = DMatrix::zeros(n, loadings.ncols());
    let block = (BLOCK / p).clamp(64, 4096).min(n);
    view_mut(&mut scores).par_row_chunks_mut(block).enumerate().for_each_init(
        || vec![0.0; block * p],
        |buffer, (place, target)| {
            if stop() {
                return;
            }
            let n_rows = target.nrows();
            let buffer = &mut buffer[..n_rows * p];
            centre_block(x, mean, scale, place * block, n_rows, buffer);
            let rows = MatRef::from_column_major_slice(buffer, n_rows, p);
            matmul(target, Accum::Replace, rows, view(loadings), 1.0, Par::Seq);
        },
    );
    scores
}

/// Writes a block of rows, centred and scaled, column after column.
fn centre_block(
    x: &DMatrix<f64>,
    mean: &DVector<f64>,
    scale: &DVector<f64>,
    first: usize,
    n_rows: usize,
    buffer: &mut [f64],
) {
    let n = x.nrows();
    for (j, centred) in buffer.chunks_mut(n_rows).enumerate() {
        let column = &x.as_slice()[j * n + first..][..n_rows];
        let (mean, scale) = (mean[j], scale[j]);
        for (deviation, value) in centred.iter_mut().zip(column) {
            *deviation = value - mean;
        }
        // Dividing by one changes nothing and takes time.
        if scale != 1.0 {
            centred.iter_mut().for_each(|deviation| *deviation /= scale);
        }
    }
}

/// The product of the transpose of a matrix with the matrix.
pub(super) fn transposed_product(a: &DMatrix<f64>) -> DMatrix<f64> {
    let mut result = DMatrix::zeros(a.ncols(), a.ncols());
    let into = view_mut(&mut result);
    matmul(into, Accum::Replace, view(a).transpose(), view(a), 1.0, PIECES);
    result
}

/// The product of a matrix with the transpose of another.
pub(crate) fn product(a: &DMatrix<f64>, b: &DMatrix<f64>) -> DMatrix<f64> {
    let mut result = DMatrix::zeros(a.nrows(), b.nrows());
    let into = view_mut(&mut result);
    matmul(into, Accum::Replace, view(a), view(b).transpose(), 1.0, PIECES);
    result
}
