//! Angles between the spaces that two sets of components span.

use nalgebra::{DMatrix, DVector};

use super::check::comparable;
use crate::components::spectrum::singular;
use crate::error::{Error, Result};
use crate::table::NamedMatrix;

/// The principal angles between the spaces spanned by the columns of two matrices.
///
/// The first is the smallest angle between a direction of one space and a direction of the other,
/// the second the smallest among directions perpendicular to those, and so on; there are as many as
/// the smaller space has dimensions. All zero: the smaller space lies inside the other. A right
/// angle: a direction of one that the other knows nothing of.
///
/// With orthonormal bases P and Q, the cosines are the singular values of PᵀQ. Angles below 45
/// degrees are found from their sines, the singular values of Q − P PᵀQ, since a cosine near one has
/// lost the digits of a small angle (Björck and Golub 1973, section 3).
///
/// Both matrices have the same row names in the same order. Columns may be of any length and may
/// depend on one another: the rank counts, and is reported.
///
/// ```
/// use semiaxis::comparison::principal_angles;
/// use semiaxis::nalgebra::dmatrix;
/// use semiaxis::table::NamedMatrix;
///
/// let rows = ["x", "y", "z"].map(String::from);
/// let floor = NamedMatrix::new(dmatrix![1.0, 0.0; 0.0, 1.0; 0.0, 0.0], rows.clone(), ["1", "2"].map(String::from))?;
/// let slope = NamedMatrix::new(dmatrix![1.0, 0.0; 0.0, 1.0; 0.0, 1.0], rows, ["1", "2"].map(String::from))?;
/// let angles = principal_angles(&floor, &slope)?;
/// assert!(angles.degrees()[0].abs() < 1e-9);
/// assert!((angles.degrees()[1] - 45.0).abs() < 1e-9);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::RowNamesDiffer`] names what differs; [`Error::ZeroColumns`] when all columns of a matrix
/// are zero; [`Error::NonFinite`], [`Error::NoRows`], [`Error::NoColumns`].
pub fn principal_angles(first: &NamedMatrix, second: &NamedMatrix) -> Result<PrincipalAngles> {
    comparable(first, second)?;
    let p = basis(first, "the first matrix")?;
    let q = basis(second, "the second matrix")?;
    let (n_first, n_second) = (p.ncols(), q.ncols());
    // The smaller basis is laid against the larger one.
    let (large, small) = if n_first >= n_second { (p, q) } else { (q, p) };
    let cross = large.transpose() * &small;
    let (cosines, _) = singular(&cross)?;
    let (sines, _) = singular(&(&small - &large * &cross))?;
    let n_angles = small.ncols();
    // Cosines descend as angles grow; sines descend, so they are read from the end.
    let radians = DVector::from_fn(n_angles, |place, _| {
        let (cosine, sine) = (cosines[place].min(1.0), sines[n_angles - 1 - place].min(1.0));
        if cosine * cosine >= 0.5 { sine.asin() } else { cosine.acos() }
    });
    Ok(PrincipalAngles { radians, ranks: (n_first, n_second) })
}

/// Perpendicular unit vectors that span the columns; directions below ε max(n, k) times the largest
/// singular value do not count.
fn basis(matrix: &NamedMatrix, what: &'static str) -> Result<DMatrix<f64>> {
    let (values, vectors) = singular(&matrix.values().transpose())?;
    let (n_rows, n_cols) = matrix.shape();
    let least = f64::EPSILON * n_rows.max(n_cols) as f64 * values[0];
    let rank = values.iter().filter(|value| **value > least).count();
    if rank == 0 {
        return Err(Error::ZeroColumns { what, columns: matrix.column_names().to_vec() });
    }
    Ok(vectors.columns(0, rank).into_owned())
}

/// Angles between two spaces; made by [`principal_angles`].
#[derive(Debug, Clone, PartialEq)]
pub struct PrincipalAngles {
    radians: DVector<f64>,
    ranks: (usize, usize),
}

impl PrincipalAngles {
    /// The angles in radians, ascending, from 0 to π/2.
    pub fn radians(&self) -> &DVector<f64> {
        &self.radians
    }

    /// The angles in degrees, ascending, from 0 to 90.
    pub fn degrees(&self) -> DVector<f64> {
        self.radians.map(f64::to_degrees)
    }

    /// The cosines of the angles, descending: the canonical correlations of the two spaces.
    pub fn cosines(&self) -> DVector<f64> {
        self.radians.map(f64::cos)
    }

    /// The largest angle, in degrees.
    pub fn largest_degrees(&self) -> f64 {
        self.radians.iter().copied().fold(0.0, f64::max).to_degrees()
    }

    /// The dimensions of the first and the second space: the numerical ranks of the matrices.
    pub fn ranks(&self) -> (usize, usize) {
        self.ranks
    }
}
