//! Cross-products about the column means, in one pass over the data.
//!
//! Rows are taken in blocks that fit the cache. Each block is centred about its own means, its
//! cross-product added to a sum, and the spread of the block means about the overall means added
//! at the end:
//!
//! ```text
//! Σ_i (x_i − x̄)(x_i − x̄)ᵀ = Σ_b Σ_{i∈b} (x_i − x̄_b)(x_i − x̄_b)ᵀ + Σ_b n_b (x̄_b − x̄)(x̄_b − x̄)ᵀ
//! ```
//!
//! No large numbers are subtracted from one another, whatever the offset of a column, and every
//! value is read from memory once. The equation is the pairwise update of T. F. Chan, G. H. Golub
//! and R. J. LeVeque (1983), "Algorithms for computing the sample variance", The American
//! Statistician 37, 242–247, for many variables.
//!
//! Blocks and the parts they are summed in depend on the shape only, so the result does not depend
//! on the number of threads.

use faer::linalg::matmul::triangular::{self, BlockStructure};
use faer::{Accum, MatMut, MatRef, Par};
use nalgebra::{DMatrix, DVector};
use rayon::prelude::*;

use super::views::{PIECES, view, view_mut};

/// Column means and the cross-product of deviations from them.
pub(crate) struct CrossProduct {
    pub(crate) mean: DVector<f64>,
    /// Symmetric; only the lower triangle is filled.
    pub(crate) lower: DMatrix<f64>,
}

/// The centre and spread of each column.
pub(crate) struct Moments {
    pub(crate) mean: DVector<f64>,
    /// Sums of squared deviations from the mean.
    pub(crate) sum_squares: DVector<f64>,
}

/// The most doubles that all partial sums together may hold (128 MB).
const MOST_PARTIAL: usize = 16 << 20;

/// The most parts that rows are summed in.
const MOST_PARTS: usize = 16;

/// Doubles in a block, so that it stays in the second-level cache with its products.
const BLOCK: usize = 48 << 10;

/// The cross-product of the columns, p × p.
pub(crate) fn of_columns(x: &DMatrix<f64>) -> CrossProduct {
    let (n, p) = x.shape();
    let block = (BLOCK / p).clamp(96, 4096).min(n);
    let n_blocks = n.div_ceil(block);
    let n_parts = n_blocks.min(MOST_PARTS).min((MOST_PARTIAL / (p * p)).max(1));
    // One large product is cut inside faer; many small ones run side by side.
    let par = if n_parts == 1 && p >= 256 { PIECES } else { Par::Seq };
    let mut block_means = DMatrix::zeros(p, n_blocks);
    let blocks_per_part = n_blocks.div_ceil(n_parts);
    let sums: Vec<DMatrix<f64>> = block_means
        .as_mut_slice()
        .par_chunks_mut(p * blocks_per_part)
        .enumerate()
        .map(|(part, means)| {
            let mut sum = DMatrix::zeros(p, p);
            let mut buffer = vec![0.0; block * p];
            for (place, mean) in means.chunks_mut(p).enumerate() {
                let first = (part * blocks_per_part + place) * block;
                let n_rows = block.min(n - first);
                let buffer = &mut buffer[..n_rows * p];
                for (j, centred) in buffer.chunks_mut(n_rows).enumerate() {
                    let column = &x.as_slice()[j * n + first..][..n_rows];
                    mean[j] = centre_into(column, centred);
                }
                let block = MatRef::from_column_major_slice(buffer, n_rows, p);
                add_lower(view_mut(&mut sum), block.transpose(), block, par);
            }
            sum
        })
        .collect();
    let mut lower = add_in_order(sums);
    let mean = mean_of_blocks(&block_means, n, block);
    if n_blocks > 1 {
        let mut spread = block_means;
        for (place, mut column) in spread.column_iter_mut().enumerate() {
            let n_rows = block.min(n - place * block);
            column -= &mean;
            column *= (n_rows as f64).sqrt();
        }
        let spread = view(&spread);
        add_lower(view_mut(&mut lower), spread, spread.transpose(), PIECES);
    }
    CrossProduct { mean, lower }
}

/// The cross-product of the rows, n × n, of columns that are centred and, where `unit` says so,
/// brought to unit standard deviation (divisor n − 1). Columns that do not vary stay zero.
pub(crate) fn of_rows(x: &DMatrix<f64>, unit: bool) -> (Moments, DMatrix<f64>) {
    let (n, p) = x.shape();
    let block = (BLOCK / n).clamp(96, 4096).min(p);
    let n_blocks = p.div_ceil(block);
    let n_parts = n_blocks.min(MOST_PARTS).min((MOST_PARTIAL / (n * n)).max(1));
    let par = if n_parts == 1 && n >= 256 { PIECES } else { Par::Seq };
    let per_part = n_blocks.div_ceil(n_parts) * block;
    let mut mean = DVector::zeros(p);
    let mut sum_squares = DVector::zeros(p);
    let sums: Vec<DMatrix<f64>> = mean
        .as_mut_slice()
        .par_chunks_mut(per_part)
        .zip(sum_squares.as_mut_slice().par_chunks_mut(per_part))
        .enumerate()
        .map(|(part, (means, squares))| {
            let mut sum = DMatrix::zeros(n, n);
            let mut buffer = vec![0.0; n * block];
            for (place, (means, squares)) in
                means.chunks_mut(block).zip(squares.chunks_mut(block)).enumerate()
            {
                let first = part * per_part + place * block;
                let buffer = &mut buffer[..n * means.len()];
                for (k, scaled) in buffer.chunks_mut(n).enumerate() {
                    means[k] = centre_into(&x.as_slice()[(first + k) * n..][..n], scaled);
                    squares[k] = scaled.iter().map(|d| d * d).sum();
                    if unit && squares[k] > 0.0 {
                        let variance: f64 = squares[k] / (n - 1) as f64;
                        let factor = 1.0 / variance.sqrt();
                        scaled.iter_mut().for_each(|d| *d *= factor);
                    }
                }
                let block = MatRef::from_column_major_slice(buffer, n, means.len());
                add_lower(view_mut(&mut sum), block, block.transpose(), par);
            }
            sum
        })
        .collect();
    (Moments { mean, sum_squares }, add_in_order(sums))
}

/// Writes the deviations of a column from its mean and returns the mean.
///
/// The mean is computed twice: the rounding left in the first shows as the sum of the deviations
/// and is taken out, so that the returned mean is as good as double precision allows.
fn centre_into(column: &[f64], centred: &mut [f64]) -> f64 {
    let n = column.len() as f64;
    let first = sum(column) / n;
    for (deviation, value) in centred.iter_mut().zip(column) {
        *deviation = value - first;
    }
    let left = sum(centred) / n;
    if left != 0.0 {
        // A correction below the last digit of the mean still belongs in the deviations.
        centred.iter_mut().for_each(|deviation| *deviation -= left);
    }
    first + left
}

/// A sum in eight lanes, which vectorises and loses fewer digits than one running sum.
fn sum(values: &[f64]) -> f64 {
    let mut lanes = [0.0; 8];
    let chunks = values.chunks_exact(8);
    let rest: f64 = chunks.remainder().iter().sum();
    for chunk in chunks {
        for (lane, value) in lanes.iter_mut().zip(chunk) {
            *lane += value;
        }
    }
    ((lanes[0] + lanes[4]) + (lanes[1] + lanes[5]))
        + ((lanes[2] + lanes[6]) + (lanes[3] + lanes[7]))
        + rest
}

fn add_lower(into: MatMut<'_, f64>, a: MatRef<'_, f64>, b: MatRef<'_, f64>, par: Par) {
    triangular::matmul(
        into,
        BlockStructure::TriangularLower,
        Accum::Add,
        a,
        BlockStructure::Rectangular,
        b,
        BlockStructure::Rectangular,
        1.0,
        par,
    );
}

fn add_in_order(sums: Vec<DMatrix<f64>>) -> DMatrix<f64> {
    let mut sums = sums.into_iter();
    let mut total = sums.next().expect("at least one part, since there is at least one row");
    for sum in sums {
        total += sum;
    }
    total
}

fn mean_of_blocks(block_means: &DMatrix<f64>, n: usize, block: usize) -> DVector<f64> {
    // Averaging deviations from the first block keeps the digits of a large common offset.
    let first: DVector<f64> = block_means.column(0).into_owned();
    let mut shift = DVector::zeros(block_means.nrows());
    for (place, column) in block_means.column_iter().enumerate() {
        let n_rows = block.min(n - place * block);
        shift.axpy(n_rows as f64 / n as f64, &(column - &first), 1.0);
    }
    first + shift
}
