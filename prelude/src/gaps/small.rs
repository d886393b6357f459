//! Factorisations of the small matrices that each pattern of holes and each variable needs.
//!
//! They are as large as there are components, and there are thousands of them in one iteration;
//! allocating or dispatching for each would cost more than the arithmetic.

/// Replaces the lower triangle of a symmetric matrix (row-major, `order` × `order`) by its
/// Cholesky factor; false when it is not positive definite to within rounding.
pub(super) fn factor(matrix: &mut [f64], order: usize) -> bool {
    for i in 0..order {
        for j in 0..=i {
            let (row_i, row_j) = (&matrix[i * order..][..j], &matrix[j * order..][..j]);
            let dot: f64 = row_i.iter().zip(row_j).map(|(a, b)| a * b).sum();
            let diagonal = matrix[i * order + j];
            let rest = diagonal - dot;
            if i == j {
                // What is left of a diagonal after cancelling all of its digits is no number.
                if rest.is_nan() || rest <= diagonal.abs() * 1e-14 {
                    return false;
                }
                matrix[i * order + i] = rest.sqrt();
            } else {
                matrix[i * order + j] = rest / matrix[j * order + j];
            }
        }
    }
    true
}

/// Solves L y = b in place, L being the lower triangle of `factor`.
pub(super) fn solve_lower(factor: &[f64], order: usize, b: &mut [f64]) {
    for i in 0..order {
        let row = &factor[i * order..][..i];
        let dot: f64 = row.iter().zip(&b[..i]).map(|(l, y)| l * y).sum();
        b[i] = (b[i] - dot) / factor[i * order + i];
    }
}

/// Solves Lᵀ x = y in place.
pub(super) fn solve_upper(factor: &[f64], order: usize, y: &mut [f64]) {
    for i in (0..order).rev() {
        let value = y[i] / factor[i * order + i];
        y[i] = value;
        for (j, left) in y[..i].iter_mut().enumerate() {
            *left -= factor[i * order + j] * value;
        }
    }
}

/// Writes the inverse of L Lᵀ, whole, into `inverse`; `column` holds one column.
pub(super) fn inverse(factor: &[f64], order: usize, column: &mut [f64], inverse: &mut [f64]) {
    for j in 0..order {
        column.fill(0.0);
        column[j] = 1.0;
        solve_lower(factor, order, column);
        solve_upper(factor, order, column);
        for i in 0..order {
            inverse[i * order + j] = column[i];
        }
    }
}

/// The natural logarithm of the determinant of L Lᵀ.
pub(super) fn log_determinant(factor: &[f64], order: usize) -> f64 {
    (0..order).map(|i| 2.0 * factor[i * order + i].ln()).sum()
}

pub(super) fn dot(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}
