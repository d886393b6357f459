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
//! After an interrupt the blocks that are left are skipped; whoever asked for the product has to
//! call `checkpoint` before using it.
//!
//! Blocks and the parts they are summed in depend on the shape only, so the result does not depend
//! on the number of threads.

use faer::linalg::matmul::triangular::{self, BlockStructure};
use faer::{Accum, MatMut, MatRef, Par};
use nalgebra::{DMatrix, DVector};
use rayon::prelude::*;

use super::row_weights::RowWeights;
use super::views::{PIECES, WORTH_CUTTING, view, view_mut};
use crate::live::interrupted;

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

/// The centre and spread of each column alone.
pub(crate) fn moments(x: &DMatrix<f64>, weights: Option<&RowWeights>) -> Moments {
    let (n, p) = x.shape();
    let columns: Vec<(f64, f64)> = x
        .as_slice()
        .par_chunks(n)
        .map_init(
            || vec![0.0; n],
            |centred, column| {
                if interrupted() {
                    return (0.0, 0.0);
                }
                let centre = match weights {
                    None => centre_into(column, centred),
                    Some(weights) => weights.centre_into(column, centred, 0),
                };
                // The squares about the rounded mean exceed those about the mean by n times the
                // square of what is left of it.
                let squares: f64 = squares(centred) - n as f64 * centre.left * centre.left;
                (centre.rounded + centre.left, squares.max(0.0))
            },
        )
        .collect();
    Moments {
        mean: DVector::from_iterator(p, columns.iter().map(|(mean, _)| *mean)),
        sum_squares: DVector::from_iterator(p, columns.iter().map(|(_, squares)| *squares)),
    }
}

/// The cross-product of the columns, p × p.
pub(crate) fn of_columns(x: &DMatrix<f64>, weights: Option<&RowWeights>) -> CrossProduct {
    let (n, p) = x.shape();
    let block = (BLOCK / p).clamp(96, 4096).min(n);
    let n_blocks = n.div_ceil(block);
    let n_parts = n_blocks.min(MOST_PARTS).min((MOST_PARTIAL / (p * p)).max(1));
    // One large product is cut inside faer; many small ones run side by side.
    let par = if n_parts == 1 && p >= WORTH_CUTTING { PIECES } else { Par::Seq };
    let mut rounded = DMatrix::zeros(p, n_blocks);
    let mut left = DMatrix::zeros(p, n_blocks);
    let blocks_per_part = n_blocks.div_ceil(n_parts);
    let sum_of_part = |(part, (rounded, left)): (usize, (&mut [f64], &mut [f64]))| {
        let mut sum = DMatrix::zeros(p, p);
        let mut buffer = vec![0.0; block * p];
        let centres = rounded.chunks_mut(p).zip(left.chunks_mut(p));
        for (place, (rounded, left)) in centres.enumerate() {
            if interrupted() {
                break;
            }
            let first = (part * blocks_per_part + place) * block;
            let n_rows = block.min(n - first);
            let buffer = &mut buffer[..n_rows * p];
            for (j, centred) in buffer.chunks_mut(n_rows).enumerate() {
                let column = &x.as_slice()[j * n + first..][..n_rows];
                let centre = match weights {
                    None => centre_into(column, centred),
                    Some(weights) => weights.centre_into(column, centred, first),
                };
                (rounded[j], left[j]) = (centre.rounded, centre.left);
            }
            let block = MatRef::from_column_major_slice(buffer, n_rows, p);
            add_lower(view_mut(&mut sum), block.transpose(), block, 1.0, par);
        }
        sum
    };
    let sums =
        on_threads(rounded.as_mut_slice(), left.as_mut_slice(), p * blocks_per_part, sum_of_part);
    let mut lower = add_in_order(sums);
    let weight = |place: usize| {
        let (first, n_rows) = (place * block, block.min(n - place * block));
        weights.map_or(n_rows as f64, |weights| sum(&weights.weights()[first..first + n_rows]))
    };
    let mean = gather(&mut lower, rounded, left, weight);
    CrossProduct { mean, lower }
}

/// The cross-product of the rows, n × n, of columns that are centred and, where `unit` says so,
/// brought to unit standard deviation (divisor n − 1). Columns that do not vary stay zero.
///
/// With weights, entry (i, k) carries the roots of the weights of both rows.
pub(crate) fn of_rows(
    x: &DMatrix<f64>,
    unit: bool,
    weights: Option<&RowWeights>,
) -> (Moments, DMatrix<f64>) {
    let (n, p) = x.shape();
    let block = (BLOCK / n).clamp(96, 4096).min(p);
    let n_blocks = p.div_ceil(block);
    let n_parts = n_blocks.min(MOST_PARTS).min((MOST_PARTIAL / (n * n)).max(1));
    let par = if n_parts == 1 && n >= WORTH_CUTTING { PIECES } else { Par::Seq };
    let per_part = n_blocks.div_ceil(n_parts) * block;
    let mut mean = DVector::zeros(p);
    let mut sum_squares = DVector::zeros(p);
    let sum_of_part = |(part, (means, squares)): (usize, (&mut [f64], &mut [f64]))| {
        let mut sum = DMatrix::zeros(n, n);
        let mut buffer = vec![0.0; n * block];
        for (place, (means, squares)) in
            means.chunks_mut(block).zip(squares.chunks_mut(block)).enumerate()
        {
            if interrupted() {
                break;
            }
            let first = part * per_part + place * block;
            let buffer = &mut buffer[..n * means.len()];
            for (k, scaled) in buffer.chunks_mut(n).enumerate() {
                let column = &x.as_slice()[(first + k) * n..][..n];
                let centre = match weights {
                    None => centre_into(column, scaled),
                    Some(weights) => weights.centre_into(column, scaled, 0),
                };
                means[k] = centre.rounded + centre.left;
                match weights {
                    None => scaled.iter_mut().for_each(|deviation| *deviation -= centre.left),
                    Some(weights) => {
                        for (deviation, root) in scaled.iter_mut().zip(weights.roots()) {
                            *deviation -= centre.left * root;
                        }
                    }
                }
                squares[k] = scaled.iter().map(|d| d * d).sum();
                if unit && squares[k] > 0.0 {
                    let variance: f64 = squares[k] / (n - 1) as f64;
                    let factor = 1.0 / variance.sqrt();
                    scaled.iter_mut().for_each(|d| *d *= factor);
                }
            }
            let block = MatRef::from_column_major_slice(buffer, n, means.len());
            add_lower(view_mut(&mut sum), block, block.transpose(), 1.0, par);
        }
        sum
    };
    let sums = on_threads(mean.as_mut_slice(), sum_squares.as_mut_slice(), per_part, sum_of_part);
    (Moments { mean, sum_squares }, add_in_order(sums))
}

/// Cuts two lists into pieces of the same length and answers for each pair of pieces, in order.
///
/// One piece is answered for where the caller stands: waking another thread takes longer than a
/// small table.
fn on_threads<T: Send>(
    one: &mut [f64],
    other: &mut [f64],
    length: usize,
    answer: impl Fn((usize, (&mut [f64], &mut [f64]))) -> T + Sync + Send,
) -> Vec<T> {
    if one.len() <= length {
        return vec![answer((0, (one, other)))];
    }
    let pieces = one.par_chunks_mut(length).zip(other.par_chunks_mut(length)).enumerate();
    pieces.map(answer).collect()
}

/// A mean in two parts: what a double can hold, and what is left of it.
pub(super) struct Centre {
    pub(super) rounded: f64,
    pub(super) left: f64,
}

/// Writes the deviations of a column from its rounded mean and returns the mean.
///
/// The rounding left in the mean shows as the mean of the deviations.
fn centre_into(column: &[f64], centred: &mut [f64]) -> Centre {
    let n = column.len() as f64;
    let rounded = sum(column) / n;
    let mut lanes = [0.0; LANES];
    let (values, rest) = column.as_chunks::<LANES>();
    let (deviations, rest_deviations) = centred.as_chunks_mut::<LANES>();
    for (deviations, values) in deviations.iter_mut().zip(values) {
        for ((deviation, value), lane) in deviations.iter_mut().zip(values).zip(&mut lanes) {
            *deviation = value - rounded;
            *lane += *deviation;
        }
    }
    let mut left = fold(lanes);
    for (deviation, value) in rest_deviations.iter_mut().zip(rest) {
        *deviation = value - rounded;
        left += *deviation;
    }
    Centre { rounded, left: left / n }
}

/// Running sums kept side by side, so that they vectorise and lose fewer digits than one.
const LANES: usize = 16;

pub(super) fn sum(values: &[f64]) -> f64 {
    let mut lanes = [0.0; LANES];
    let (chunks, rest) = values.as_chunks::<LANES>();
    for chunk in chunks {
        for (lane, value) in lanes.iter_mut().zip(chunk) {
            *lane += value;
        }
    }
    fold(lanes) + rest.iter().sum::<f64>()
}

fn squares(values: &[f64]) -> f64 {
    let mut lanes = [0.0; LANES];
    let (chunks, rest) = values.as_chunks::<LANES>();
    for chunk in chunks {
        for (lane, value) in lanes.iter_mut().zip(chunk) {
            *lane += value * value;
        }
    }
    fold(lanes) + rest.iter().map(|value| value * value).sum::<f64>()
}

fn fold(lanes: [f64; LANES]) -> f64 {
    let mut width = LANES / 2;
    let mut lanes = lanes;
    while width > 0 {
        for lane in 0..width {
            lanes[lane] += lanes[lane + width];
        }
        width /= 2;
    }
    lanes[0]
}

fn add_lower(into: MatMut<'_, f64>, a: MatRef<'_, f64>, b: MatRef<'_, f64>, factor: f64, par: Par) {
    triangular::matmul(
        into,
        BlockStructure::TriangularLower,
        Accum::Add,
        a,
        BlockStructure::Rectangular,
        b,
        BlockStructure::Rectangular,
        factor,
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

/// Adds the spread of the block means to a sum of products about their rounded values, and returns
/// the mean of all rows.
///
/// Only differences of block means enter, so that digits lost to a large common offset are those
/// that a double could not hold in the first place.
fn gather(
    lower: &mut DMatrix<f64>,
    rounded: DMatrix<f64>,
    left: DMatrix<f64>,
    weight: impl Fn(usize) -> f64,
) -> DVector<f64> {
    let n: f64 = (0..left.ncols()).map(&weight).sum();
    let first: DVector<f64> = rounded.column(0).into_owned();
    let mut spread = rounded;
    let mut shift = DVector::zeros(first.len());
    for (place, mut column) in spread.column_iter_mut().enumerate() {
        column -= &first;
        column += left.column(place);
        shift.axpy(weight(place) / n, &column, 1.0);
    }
    let par = if first.len() < WORTH_CUTTING { Par::Seq } else { PIECES };
    let weighted = |mut matrix: DMatrix<f64>| {
        for (place, mut column) in matrix.column_iter_mut().enumerate() {
            column *= weight(place).sqrt();
        }
        matrix
    };
    for mut column in spread.column_iter_mut() {
        column -= &shift;
    }
    let spread = weighted(spread);
    if spread.ncols() > 1 {
        add_lower(view_mut(lower), view(&spread), view(&spread).transpose(), 1.0, par);
    }
    // Σ(x − c)(x − c)ᵀ exceeds the product about the mean m by n (m − c)(m − c)ᵀ, here with m − c
    // what rounding left. It matters for offsets some 1e8 times the spread and beyond.
    let left = weighted(left);
    let matters = |j: usize| left.row(j).norm_squared() > f64::EPSILON * lower[(j, j)];
    if (0..first.len()).any(matters) {
        add_lower(view_mut(lower), view(&left), view(&left).transpose(), -1.0, par);
    }
    first + shift
}
