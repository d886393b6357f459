//! The orthomax family by rotations in one plane after the other, each to its exact best angle.
//!
//! For two columns x and y, with u = x² − y² and v = 2 x y for each row, the criterion
//!
//! ```text
//! V = Σ_k [ Σ_j λ_jk⁴ − (w/p) (Σ_j λ_jk²)² ]
//! ```
//!
//! changes with the angle φ of a turn in their plane as
//!
//! ```text
//! constant + (d cos 4φ + n sin 4φ) / 4
//! n = 2 Σuv − 2 (w/p) Σu Σv,   d = Σ(u² − v²) − (w/p) ((Σu)² − (Σv)²)
//! ```
//!
//! so its maximum lies at φ = atan2(n, d) / 4 (Kaiser 1958, for w = 1; Harman 1976, section 13.5).
//! V never falls, and the turn that would make n zero at a minimum is not mistaken for an arrival.

use nalgebra::DMatrix;

use super::fit::{Arrival, Limits};
use crate::error::{Error, Result};
use crate::live::interrupted;

/// Below this share of the terms they are made of, n and d are rounding errors: all angles are
/// equally good.
const FLAT: f64 = 1e-14;

/// The criterion with weight w; larger is simpler.
pub(super) fn criterion(loadings: &DMatrix<f64>, weight: f64) -> f64 {
    let share = weight / loadings.nrows() as f64;
    let of_column = |column: &[f64]| {
        let (mut fourth, mut second) = (0.0, 0.0);
        for value in column {
            let square = value * value;
            second += square;
            fourth += square * square;
        }
        fourth - share * second * second
    };
    loadings.as_slice().chunks(loadings.nrows()).map(of_column).sum()
}

/// Turns columns until no plane has anything left to gain; `turn` starts at an orthogonal matrix.
pub(super) fn seek(
    loadings: &DMatrix<f64>,
    weight: f64,
    mut turn: DMatrix<f64>,
    limits: Limits,
) -> Result<Arrival> {
    let (p, k) = loadings.shape();
    let share = weight / p as f64;
    let mut turned = loadings * &turn;
    let (mut iterations, mut gradient) = (0, f64::INFINITY);
    while iterations < limits.iterations && gradient > limits.tolerance {
        if interrupted() {
            return Err(Error::Interrupted);
        }
        iterations += 1;
        gradient = 0.0;
        for first in 0..k {
            for second in first + 1..k {
                let plane = Plane::of(&turned, first, second, share);
                gradient = plane.gradient().max(gradient);
                if let Some((sine, cosine)) = plane.best_angle().map(f64::sin_cos) {
                    turn_columns(&mut turned, first, second, sine, cosine);
                    turn_columns(&mut turn, first, second, sine, cosine);
                }
            }
        }
    }
    let criterion = criterion(&turned, weight);
    Ok(Arrival { turn, criterion, iterations, gradient })
}

/// How the criterion changes with a turn in one plane.
struct Plane {
    n: f64,
    d: f64,
    /// The size of the terms that n and d are made of.
    size: f64,
}

impl Plane {
    fn of(columns: &DMatrix<f64>, first: usize, second: usize, share: f64) -> Self {
        let p = columns.nrows();
        let values = columns.as_slice();
        let (x, y) = (&values[first * p..][..p], &values[second * p..][..p]);
        let (mut u_sum, mut v_sum, mut difference, mut product, mut size) =
            (0.0, 0.0, 0.0, 0.0, 0.0);
        for (x, y) in x.iter().zip(y) {
            let (u, v) = ((x - y) * (x + y), 2.0 * x * y);
            u_sum += u;
            v_sum += v;
            difference += (u - v) * (u + v);
            product += u * v;
            size += u * u + v * v;
        }
        Plane {
            n: 2.0 * (product - share * u_sum * v_sum),
            d: difference - share * (u_sum - v_sum) * (u_sum + v_sum),
            size,
        }
    }

    fn is_flat(&self) -> bool {
        self.n.hypot(self.d) <= FLAT * self.size
    }

    /// The slope in relation to the size of the terms; at a minimum, what could be gained.
    fn gradient(&self) -> f64 {
        if self.is_flat() {
            return 0.0;
        }
        (if self.d < 0.0 { self.n.hypot(self.d) } else { self.n.abs() }) / self.size
    }

    fn best_angle(&self) -> Option<f64> {
        (!self.is_flat()).then(|| self.n.atan2(self.d) / 4.0)
    }
}

/// (x, y) becomes (x cos φ + y sin φ, y cos φ − x sin φ).
fn turn_columns(matrix: &mut DMatrix<f64>, first: usize, second: usize, sine: f64, cosine: f64) {
    let rows = matrix.nrows();
    let (before, after) = matrix.as_mut_slice().split_at_mut(second * rows);
    for (x, y) in before[first * rows..][..rows].iter_mut().zip(&mut after[..rows]) {
        (*x, *y) = (*x * cosine + *y * sine, *y * cosine - *x * sine);
    }
}
