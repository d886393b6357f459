//! nalgebra's memory seen through faer's views, without copying.

use faer::{MatMut, MatRef};
use nalgebra::DMatrix;

/// Into how many pieces faer may cut one operation.
///
/// A fixed number rather than the number of threads, so that sums are cut, and rounded, the same
/// way on every machine and in every pool of threads.
pub(crate) const PIECES: faer::Par = faer::Par::Rayon(std::num::NonZeroUsize::new(4).unwrap());

/// From this order of matrix on, one operation is worth cutting into pieces.
pub(crate) const WORTH_CUTTING: usize = 256;

/// A read-only view of the whole matrix.
pub(crate) fn view(matrix: &DMatrix<f64>) -> MatRef<'_, f64> {
    MatRef::from_column_major_slice(matrix.as_slice(), matrix.nrows(), matrix.ncols())
}

/// A view of the whole matrix to write through.
pub(crate) fn view_mut(matrix: &mut DMatrix<f64>) -> MatMut<'_, f64> {
    let (n_rows, n_cols) = matrix.shape();
    MatMut::from_column_major_slice_mut(matrix.as_mut_slice(), n_rows, n_cols)
}
