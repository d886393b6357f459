//! Eigenvalues, singular values and the sign rule, on faer's kernels.

use faer::diag::DiagMut;
use faer::dyn_stack::{MemBuffer, MemStack};
use faer::linalg::evd::{ComputeEigenvectors, self_adjoint_evd, self_adjoint_evd_scratch};
use faer::linalg::householder::{
    apply_block_householder_sequence_on_the_left_in_place_scratch,
    apply_block_householder_sequence_on_the_left_in_place_with_conj,
};
use faer::linalg::qr::no_pivoting::factor::{
    qr_in_place, qr_in_place_scratch, recommended_block_size,
};
use faer::linalg::svd::{ComputeSvdVectors, svd, svd_scratch};
use faer::{Conj, Par};
use nalgebra::{DMatrix, DVector};

use super::views::{PIECES, WORTH_CUTTING, view, view_mut};
use crate::error::{Error, Result};

/// Loadings within this relative distance of the largest count as tied with it.
const TIED: f64 = 1e-8;

/// Roots in descending order, and the unit-length vectors that belong to them.
pub(crate) struct Spectrum {
    pub(crate) roots: DVector<f64>,
    pub(crate) vectors: DMatrix<f64>,
}

/// Decomposes a symmetric matrix of which the lower triangle is filled.
pub(crate) fn symmetric(lower: DMatrix<f64>) -> Result<Spectrum> {
    let order = lower.nrows();
    let par = par(order);
    let mut ascending = DVector::zeros(order);
    let mut vectors = DMatrix::zeros(order, order);
    let scratch =
        self_adjoint_evd_scratch::<f64>(order, ComputeEigenvectors::Yes, par, Default::default());
    self_adjoint_evd(
        view(&lower),
        DiagMut::from_slice_mut(ascending.as_mut_slice()),
        Some(view_mut(&mut vectors)),
        par,
        MemStack::new(&mut MemBuffer::new(scratch)),
        Default::default(),
    )
    .map_err(|_| Error::NoConvergence { method: "the decomposition of a symmetric matrix" })?;
    let roots = DVector::from_iterator(order, ascending.iter().rev().copied());
    // Reversing columns in place swaps halves and copies nothing else.
    for k in 0..order / 2 {
        vectors.swap_columns(k, order - 1 - k);
    }
    Ok(Spectrum { roots, vectors })
}

/// Only the roots of a symmetric matrix of which the lower triangle is filled, written ascending,
/// on one thread; `workspace` is kept between calls.
pub(crate) fn symmetric_roots(
    lower: &DMatrix<f64>,
    ascending: &mut [f64],
    workspace: &mut MemBuffer,
) -> Result<()> {
    self_adjoint_evd(
        view(lower),
        DiagMut::from_slice_mut(ascending),
        None,
        Par::Seq,
        MemStack::new(workspace),
        Default::default(),
    )
    .map_err(|_| Error::NoConvergence { method: "the decomposition of a symmetric matrix" })
}

/// The roots of a symmetric matrix of which the lower triangle is filled, written ascending, and
/// the unit-length vectors that belong to them, on one thread; `workspace` is kept between calls.
pub(crate) fn symmetric_pairs(
    lower: &DMatrix<f64>,
    ascending: &mut [f64],
    vectors: &mut DMatrix<f64>,
    workspace: &mut MemBuffer,
) -> Result<()> {
    self_adjoint_evd(
        view(lower),
        DiagMut::from_slice_mut(ascending),
        Some(view_mut(vectors)),
        Par::Seq,
        MemStack::new(workspace),
        Default::default(),
    )
    .map_err(|_| Error::NoConvergence { method: "the decomposition of a symmetric matrix" })
}

/// Memory for [`symmetric_pairs`] of matrices of this order.
pub(crate) fn pairs_workspace(order: usize) -> MemBuffer {
    MemBuffer::new(self_adjoint_evd_scratch::<f64>(
        order,
        ComputeEigenvectors::Yes,
        Par::Seq,
        Default::default(),
    ))
}

/// Memory for [`symmetric_roots`] of matrices of this order.
pub(crate) fn roots_workspace(order: usize) -> MemBuffer {
    MemBuffer::new(self_adjoint_evd_scratch::<f64>(
        order,
        ComputeEigenvectors::No,
        Par::Seq,
        Default::default(),
    ))
}

/// Singular values in descending order, and the right singular vectors of unit length.
pub(crate) fn singular(x: &DMatrix<f64>) -> Result<(DVector<f64>, DMatrix<f64>)> {
    let (n, p) = x.shape();
    let size = n.min(p);
    let par = par(size);
    let mut values = DVector::zeros(size);
    let mut vectors = DMatrix::zeros(p, size);
    // A wide matrix is decomposed as its transpose, whose left vectors are those wanted.
    let (matrix, wanted) = if n >= p {
        (view(x), (ComputeSvdVectors::No, ComputeSvdVectors::Thin))
    } else {
        (view(x).transpose(), (ComputeSvdVectors::Thin, ComputeSvdVectors::No))
    };
    let (rows, cols) = (matrix.nrows(), matrix.ncols());
    let scratch = svd_scratch::<f64>(rows, cols, wanted.0, wanted.1, par, Default::default());
    let into = view_mut(&mut vectors);
    let (left, right) = if n >= p { (None, Some(into)) } else { (Some(into), None) };
    svd(
        matrix,
        DiagMut::from_slice_mut(values.as_mut_slice()),
        left,
        right,
        par,
        MemStack::new(&mut MemBuffer::new(scratch)),
        Default::default(),
    )
    .map_err(|_| Error::NoConvergence { method: "the singular value decomposition" })?;
    Ok((values, vectors))
}

/// Perpendicular columns of unit length that span the columns of a matrix, which has no more of
/// them than rows, each close to its own where those were nearly perpendicular (Householder's QR).
/// Columns that depend on those before them are replaced by arbitrary ones.
pub(crate) fn orthonormal(mut columns: DMatrix<f64>) -> DMatrix<f64> {
    let (n, p) = columns.shape();
    let par = par(n.min(4 * p));
    let block = recommended_block_size::<f64>(n, p);
    let mut coefficients = DMatrix::zeros(block, p);
    let scratch = qr_in_place_scratch::<f64>(n, p, block, par, Default::default());
    qr_in_place(
        view_mut(&mut columns),
        view_mut(&mut coefficients),
        par,
        MemStack::new(&mut MemBuffer::new(scratch)),
        Default::default(),
    );
    let mut basis = DMatrix::identity(n, p);
    let scratch = apply_block_householder_sequence_on_the_left_in_place_scratch::<f64>(n, block, p);
    apply_block_householder_sequence_on_the_left_in_place_with_conj(
        view(&columns),
        view(&coefficients),
        Conj::No,
        view_mut(&mut basis),
        par,
        MemStack::new(&mut MemBuffer::new(scratch)),
    );
    basis
}

/// One when the loading of largest absolute value is positive, minus one when it is negative.
///
/// Loadings that rounding alone may have told apart count as tied, and of those the first
/// decides: the sign must not depend on the last digit.
pub(crate) fn sign(loadings: &[f64]) -> f64 {
    let largest = loadings.iter().fold(0.0_f64, |largest, loading| largest.max(loading.abs()));
    loadings
        .iter()
        .find(|loading| loading.abs() >= largest * (1.0 - TIED))
        .map_or(1.0, |loading| loading.signum())
}

fn par(order: usize) -> Par {
    if order < WORTH_CUTTING { Par::Seq } else { PIECES }
}
