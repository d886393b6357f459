//! Concentration: from one subset of rows to a tighter one.
//!
//! Taking the h rows closest to the mean of a subset, measured by that subset's own covariance,
//! never makes the determinant larger (P. J. Rousseeuw and K. Van Driessen (1999), theorem 1).

use faer::linalg::matmul::triangular::{self, BlockStructure};
use faer::{Accum, MatRef, Par};
use nalgebra::{DMatrix, DVector};

use crate::components::views::view_mut;

/// Rows measured at once, so that one block of them stays in the first-level cache.
const BLOCK: usize = 128;

/// Centre and covariance of a subset of rows, ready for measuring distances.
#[derive(Debug, Clone)]
pub(super) struct Estimate {
    pub(super) centre: DVector<f64>,
    /// The lower triangle of the covariance (divisor: rows − 1).
    pub(super) covariance: DMatrix<f64>,
    /// Its Cholesky factor, lower.
    factor: DMatrix<f64>,
    pub(super) log_determinant: f64,
}

/// A subset whose rows lie in a hyperplane.
#[derive(Debug, Clone)]
pub(super) struct Flat {
    pub(super) centre: DVector<f64>,
    /// The lower triangle of the covariance.
    pub(super) covariance: DMatrix<f64>,
}

/// Memory for rows of one shape, kept from step to step.
pub(super) struct Workspace {
    squares: Vec<f64>,
    keys: Vec<(f64, u32)>,
    gathered: Vec<f64>,
    block: Vec<f64>,
}

impl Workspace {
    pub(super) fn new() -> Self {
        Workspace { squares: vec![], keys: vec![], gathered: vec![], block: vec![] }
    }
}

/// Centre and covariance of the given rows, or the hyperplane they lie in.
pub(super) fn estimate(
    x: &DMatrix<f64>,
    rows: &[u32],
    workspace: &mut Workspace,
) -> Result<Estimate, Flat> {
    let (n, p) = x.shape();
    let h = rows.len();
    workspace.gathered.resize(h * p, 0.0);
    let mut centre = DVector::zeros(p);
    for (j, gathered) in workspace.gathered.chunks_exact_mut(h).enumerate() {
        let column = &x.as_slice()[j * n..(j + 1) * n];
        let mut sum = 0.0;
        for (value, &row) in gathered.iter_mut().zip(rows) {
            *value = column[row as usize];
            sum += *value;
        }
        centre[j] = sum / h as f64;
        gathered.iter_mut().for_each(|value| *value -= centre[j]);
    }
    let mut covariance = DMatrix::zeros(p, p);
    let gathered = MatRef::from_column_major_slice(&workspace.gathered, h, p);
    triangular::matmul(
        view_mut(&mut covariance),
        BlockStructure::TriangularLower,
        Accum::Replace,
        gathered.transpose(),
        BlockStructure::Rectangular,
        gathered,
        BlockStructure::Rectangular,
        1.0 / (h as f64 - 1.0),
        Par::Seq,
    );
    match factorise(&covariance) {
        Some((factor, log_determinant)) => {
            Ok(Estimate { centre, covariance, factor, log_determinant })
        }
        None => Err(Flat { centre, covariance }),
    }
}

/// The Cholesky factor of the lower triangle and the logarithm of the determinant; none when a
/// pivot is what rounding leaves of a variable that the ones before it determine.
fn factorise(covariance: &DMatrix<f64>) -> Option<(DMatrix<f64>, f64)> {
    let p = covariance.nrows();
    let least = 64.0 * f64::EPSILON * p as f64;
    let mut factor = covariance.clone();
    let mut log_determinant = 0.0;
    for j in 0..p {
        for k in 0..j {
            let part = factor[(j, k)];
            for i in j..p {
                let other = factor[(i, k)];
                factor[(i, j)] -= part * other;
            }
        }
        let pivot = factor[(j, j)];
        if pivot.is_nan() || pivot <= least * covariance[(j, j)] {
            return None;
        }
        log_determinant += pivot.ln();
        let root = pivot.sqrt();
        for i in j..p {
            factor[(i, j)] /= root;
        }
    }
    Some((factor, log_determinant))
}

/// The squared distance of every row from an estimate's centre, by its covariance.
pub(super) fn squared_distances(
    x: &DMatrix<f64>,
    estimate: &Estimate,
    squares: &mut Vec<f64>,
    block: &mut Vec<f64>,
) {
    let (n, p) = x.shape();
    squares.resize(n, 0.0);
    block.resize(BLOCK * p, 0.0);
    for first in (0..n).step_by(BLOCK) {
        let size = BLOCK.min(n - first);
        let target = &mut squares[first..first + size];
        target.fill(0.0);
        // Forward substitution, one coordinate of all rows of the block after the other.
        for j in 0..p {
            let (done, rest) = block.split_at_mut(j * BLOCK);
            let current = &mut rest[..size];
            let centre = estimate.centre[j];
            for (value, x) in current.iter_mut().zip(&x.as_slice()[j * n + first..][..size]) {
                *value = x - centre;
            }
            for (k, before) in done.chunks_exact(BLOCK).enumerate() {
                let coefficient = estimate.factor[(j, k)];
                for (value, before) in current.iter_mut().zip(&before[..size]) {
                    *value -= coefficient * before;
                }
            }
            let scale = 1.0 / estimate.factor[(j, j)];
            for (value, square) in current.iter_mut().zip(target.iter_mut()) {
                *value *= scale;
                *square += *value * *value;
            }
        }
    }
}

/// The h rows closest to an estimate, in row order; of rows at the same distance the first.
pub(super) fn closest(
    x: &DMatrix<f64>,
    from: &Estimate,
    h: usize,
    workspace: &mut Workspace,
    rows: &mut Vec<u32>,
) {
    squared_distances(x, from, &mut workspace.squares, &mut workspace.block);
    smallest(&workspace.squares, h, &mut workspace.keys, rows);
}

/// The places of the h smallest numbers, ascending; of equal numbers the first.
pub(super) fn smallest(
    values: &[f64],
    h: usize,
    keys: &mut Vec<(f64, u32)>,
    places: &mut Vec<u32>,
) {
    keys.clear();
    keys.extend(values.iter().zip(0..).map(|(value, place)| (*value, place)));
    let order = |a: &(f64, u32), b: &(f64, u32)| a.0.total_cmp(&b.0).then(a.1.cmp(&b.1));
    let (_, last, _) = keys.select_nth_unstable_by(h - 1, order);
    let last = *last;
    places.clear();
    places.extend(values.iter().zip(0u32..).filter_map(|(value, place)| {
        (order(&(*value, place), &last) != std::cmp::Ordering::Greater).then_some(place)
    }));
}
