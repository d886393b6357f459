//! The one way in which tests compare numbers.
//!
//! A relative check has no absolute floor, an absolute check is for expected zeros only, a matrix
//! check names its worst element, eigenvectors compare up to sign, and those of repeated roots by
//! the projector onto the space they span. NaN equals nothing.

use nalgebra::DMatrix;

/// Asserts that a number has a relative error of at most `tolerance`.
#[track_caller]
pub fn assert_relative(actual: f64, expected: f64, tolerance: f64, what: &str) {
    let error = ((actual - expected) / expected).abs();
    assert!(
        error <= tolerance,
        "{what}: {actual:e} for {expected:e}, relative error {error:e} above {tolerance:e}"
    );
}

/// Asserts that each number of a list has a relative error of at most `tolerance`.
#[track_caller]
pub fn assert_all_relative(actual: &[f64], expected: &[f64], tolerance: f64, what: &str) {
    assert_eq!(actual.len(), expected.len(), "{what}: length");
    for (place, (actual, expected)) in actual.iter().zip(expected).enumerate() {
        assert_relative(*actual, *expected, tolerance, &format!("{what} [{place}]"));
    }
}

/// Asserts that a number that should be zero is at most `tolerance` away from it.
#[track_caller]
pub fn assert_zero(actual: f64, tolerance: f64, what: &str) {
    assert!(actual.abs() <= tolerance, "{what}: {actual:e} for zero, allowed {tolerance:e}");
}

/// Asserts that every element is within `tolerance` times the largest expected one.
#[track_caller]
pub fn assert_matrix(actual: &DMatrix<f64>, expected: &DMatrix<f64>, tolerance: f64, what: &str) {
    assert_eq!(actual.shape(), expected.shape(), "{what}: shape");
    let (error, row, column) = worst(actual, expected);
    let allowed = tolerance * expected.amax();
    assert!(
        error <= allowed,
        "{what}: [{row}, {column}] is {:e} for {:e}, off by {error:e}, allowed {allowed:e}",
        actual[(row, column)],
        expected[(row, column)],
    );
}

/// [`assert_matrix`] after each column has been given the sign that fits better.
#[track_caller]
pub fn assert_columns_up_to_sign(
    actual: &DMatrix<f64>,
    expected: &DMatrix<f64>,
    tolerance: f64,
    what: &str,
) {
    assert_eq!(actual.shape(), expected.shape(), "{what}: shape");
    let mut aligned = actual.clone();
    for (mut column, expected) in aligned.column_iter_mut().zip(expected.column_iter()) {
        if column.dot(&expected) < 0.0 {
            column.neg_mut();
        }
    }
    assert_matrix(&aligned, expected, tolerance, what);
}

/// Asserts that two sets of perpendicular unit vectors span the same space.
#[track_caller]
pub fn assert_same_space(
    actual: &DMatrix<f64>,
    expected: &DMatrix<f64>,
    tolerance: f64,
    what: &str,
) {
    let projector = |vectors: &DMatrix<f64>| vectors * vectors.transpose();
    assert_matrix(&projector(actual), &projector(expected), tolerance, what);
}

/// The largest difference and where it is; an element that is not a number is the worst.
fn worst(actual: &DMatrix<f64>, expected: &DMatrix<f64>) -> (f64, usize, usize) {
    let mut worst = (0.0, 0, 0);
    for column in 0..actual.ncols() {
        for row in 0..actual.nrows() {
            let error = (actual[(row, column)] - expected[(row, column)]).abs();
            if error.is_nan() {
                return (f64::INFINITY, row, column);
            }
            if error > worst.0 {
                worst = (error, row, column);
            }
        }
    }
    worst
}
