//! Components of a refit beside those of the analysis, and angles between subspaces.

use faer::dyn_stack::MemBuffer;
use nalgebra::DMatrix;

use crate::components::spectrum::{roots_workspace, symmetric_roots};
use crate::error::Result;

/// Gives each row of a matrix a column of its own so that the sum of absolute values is largest.
///
/// The shortest augmenting paths of H. W. Kuhn (1955), "The Hungarian method for the assignment
/// problem", with dual variables; k² m steps for k rows and m ≥ k columns.
#[derive(Debug)]
pub(super) struct Assignment {
    // One more entry each: place 0 stands for "none".
    row_price: Vec<f64>,
    column_price: Vec<f64>,
    row_of: Vec<usize>,
    from: Vec<usize>,
    slack: Vec<f64>,
    used: Vec<bool>,
}

impl Assignment {
    pub(super) fn new(n_rows: usize, n_cols: usize) -> Self {
        Assignment {
            row_price: vec![0.0; n_rows + 1],
            column_price: vec![0.0; n_cols + 1],
            row_of: vec![0; n_cols + 1],
            from: vec![0; n_cols + 1],
            slack: vec![0.0; n_cols + 1],
            used: vec![false; n_cols + 1],
        }
    }

    /// Writes the column of each row.
    pub(super) fn solve(&mut self, congruence: &DMatrix<f64>, column_of: &mut [usize]) {
        let (n_rows, n_cols) = congruence.shape();
        self.row_price.fill(0.0);
        self.column_price.fill(0.0);
        self.row_of.fill(0);
        for row in 1..=n_rows {
            self.row_of[0] = row;
            self.slack.fill(f64::INFINITY);
            self.used.fill(false);
            let mut column = 0;
            while self.row_of[column] != 0 {
                column = self.nearest_column(column, congruence, n_cols);
            }
            while column != 0 {
                let before = self.from[column];
                self.row_of[column] = self.row_of[before];
                column = before;
            }
        }
        for column in 1..=n_cols {
            if self.row_of[column] != 0 {
                column_of[self.row_of[column] - 1] = column - 1;
            }
        }
    }

    /// Extends the tree of alternating paths by the column that costs least, and returns it.
    fn nearest_column(&mut self, at: usize, congruence: &DMatrix<f64>, n_cols: usize) -> usize {
        self.used[at] = true;
        let row = self.row_of[at];
        let mut least = f64::INFINITY;
        let mut next = 0;
        for column in 1..=n_cols {
            if self.used[column] {
                continue;
            }
            let cost = 1.0 - congruence[(row - 1, column - 1)].abs();
            let reduced = cost - self.row_price[row] - self.column_price[column];
            if reduced < self.slack[column] {
                self.slack[column] = reduced;
                self.from[column] = at;
            }
            if self.slack[column] < least {
                least = self.slack[column];
                next = column;
            }
        }
        for column in 0..=n_cols {
            if self.used[column] {
                self.row_price[self.row_of[column]] += least;
                self.column_price[column] -= least;
            } else {
                self.slack[column] -= least;
            }
        }
        next
    }
}

/// The principal angles between two subspaces of the same dimension.
pub(super) struct Angles {
    inner: DMatrix<f64>,
    gram: DMatrix<f64>,
    rest: DMatrix<f64>,
    squares: Vec<f64>,
    scratch: MemBuffer,
}

impl Angles {
    pub(super) fn new(n_variables: usize, dimension: usize) -> Self {
        Angles {
            inner: DMatrix::zeros(dimension, dimension),
            gram: DMatrix::zeros(dimension, dimension),
            rest: DMatrix::zeros(n_variables, dimension),
            squares: vec![0.0; dimension],
            scratch: roots_workspace(dimension),
        }
    }

    /// Angles in radians, ascending, between the spaces that the columns of `a` and the first
    /// columns of `b` span; columns are perpendicular and of unit length, or zero.
    ///
    /// Cosines are the singular values of AᵀB and sines those of B − A AᵀB. Small angles are read
    /// from sines, large ones from cosines, since each loses digits at the other end (Björck and
    /// Golub 1973).
    pub(super) fn between(&mut self, a: &DMatrix<f64>, b: &DMatrix<f64>) -> Result<Vec<f64>> {
        let dimension = a.ncols();
        let b = b.columns(0, dimension);
        self.inner.gemm_tr(1.0, a, &b, 0.0);
        self.rest.copy_from(&b);
        self.rest.gemm(-1.0, a, &self.inner, 1.0);
        self.gram.gemm_tr(1.0, &self.inner, &self.inner, 0.0);
        symmetric_roots(&self.gram, &mut self.squares, &mut self.scratch)?;
        let mut angles: Vec<f64> =
            self.squares.iter().rev().map(|cos| cos.clamp(0.0, 1.0).sqrt().acos()).collect();
        self.gram.gemm_tr(1.0, &self.rest, &self.rest, 0.0);
        symmetric_roots(&self.gram, &mut self.squares, &mut self.scratch)?;
        for (angle, sin) in angles.iter_mut().zip(&self.squares) {
            if *sin < 0.5 {
                *angle = sin.max(0.0).sqrt().asin();
            }
        }
        Ok(angles)
    }
}

/// The first columns of `b` rotated together so that they lie as close as possible to those of
/// `a` in the sum of squared differences (P. H. Schönemann (1966), "A generalized solution of the
/// orthogonal Procrustes problem", Psychometrika 31, 1–10).
pub(super) fn rotated_onto(a: &DMatrix<f64>, b: &DMatrix<f64>) -> DMatrix<f64> {
    let b = b.columns(0, a.ncols());
    let svd = b.tr_mul(a).svd(true, true);
    match (svd.u, svd.v_t) {
        (Some(u), Some(v_t)) => b * (u * v_t),
        // Both were asked for.
        _ => b.into_owned(),
    }
}
