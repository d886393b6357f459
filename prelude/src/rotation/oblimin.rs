//! Direct oblimin by oblique gradient projection (Jennrich 2002; Bernaards and Jennrich 2005).
//!
//! T moves against the gradient, and its columns are brought back to unit length:
//!
//! ```text
//! L = A (Tᵀ)⁻¹,   G = −(Lᵀ ∂V/∂L T⁻¹)ᵀ,   G_p = G − T diag(Tᵀ G),   T ← unit columns of T − α G_p
//! ```
//!
//! The step α begins at the ratio of J. Barzilai and J. M. Borwein (1988), "Two-point step size
//! gradient methods", IMA Journal of Numerical Analysis 8, 141–148, and is halved until the
//! criterion falls enough.

use nalgebra::DMatrix;

use super::fit::{Arrival, Limits};
use crate::error::{Error, Result};
use crate::live::interrupted;

/// How often one step is halved before the search counts as stuck.
const MOST_HALVINGS: usize = 60;

/// Criteria closer than this are the same number but for rounding.
const ROUNDING: f64 = 4.0 * f64::EPSILON;

/// A determinant of T below this means that two components have fallen together.
const COLLAPSED: f64 = 1e-6;

/// The criterion; smaller is simpler.
pub(super) fn criterion(loadings: &DMatrix<f64>, gamma: f64) -> f64 {
    let (p, k) = loadings.shape();
    let squares = loadings.map(|value| value * value);
    let mut sum = 0.0;
    for second in 1..k {
        for first in 0..second {
            let (a, b) = (squares.column(first), squares.column(second));
            sum += a.dot(&b) - gamma / p as f64 * a.sum() * b.sum();
        }
    }
    sum
}

/// Goes downhill from `turn`, an orthogonal matrix; `None` when components fall together.
pub(super) fn seek(
    loadings: &DMatrix<f64>,
    gamma: f64,
    turn: DMatrix<f64>,
    limits: Limits,
) -> Result<Option<Arrival>> {
    let Some(mut here) = Position::at(loadings, gamma, turn) else { return Ok(None) };
    let mut step = 1.0;
    for iterations in 0..limits.iterations {
        if interrupted() {
            return Err(Error::Interrupted);
        }
        let gradient = here.slope.norm();
        if gradient <= limits.tolerance {
            return Ok(Some(here.arrival(iterations, gradient)));
        }
        let Some(next) = downhill(loadings, gamma, &here, gradient, step) else {
            return Ok(here.is_apart().then(|| here.arrival(iterations, gradient)));
        };
        let moved = &next.turn - &here.turn;
        let bend = moved.dot(&(&next.slope - &here.slope));
        // Where the slope does not bend upwards the ratio says nothing; then go further.
        step =
            if bend > 0.0 { (moved.norm_squared() / bend).min(1e3) } else { 2.0 * step.min(1e3) };
        here = next;
    }
    let gradient = here.slope.norm();
    Ok(here.is_apart().then(|| here.arrival(limits.iterations, gradient)))
}

fn downhill(
    loadings: &DMatrix<f64>,
    gamma: f64,
    here: &Position,
    gradient: f64,
    mut step: f64,
) -> Option<Position> {
    let slack = ROUNDING * here.size;
    for _ in 0..MOST_HALVINGS {
        let mut turn = &here.turn - step * &here.slope;
        for mut column in turn.column_iter_mut() {
            let length = column.norm();
            column /= length;
        }
        if let Some(next) = Position::at(loadings, gamma, turn)
            && next.value <= here.value - 0.5 * gradient * gradient * step + slack
        {
            return Some(next);
        }
        step /= 2.0;
    }
    None
}

/// A place of the search. Criterion and slope are for one row on average, so that neither depends on
/// how many rows there are.
struct Position {
    turn: DMatrix<f64>,
    value: f64,
    /// The size of the terms that the value is made of.
    size: f64,
    slope: DMatrix<f64>,
}

impl Position {
    fn at(loadings: &DMatrix<f64>, gamma: f64, turn: DMatrix<f64>) -> Option<Self> {
        let (p, k) = loadings.shape();
        let inverse = turn.clone().try_inverse()?;
        let pattern = loadings * inverse.transpose();
        let squares = pattern.map(|value| value * value);
        // Each row's squares over the other columns, less γ times their mean over the rows.
        let sums = squares.row_sum();
        let total = sums.sum();
        let n_rows = p as f64;
        let mut others = DMatrix::zeros(p, k);
        let row_sums = squares.column_sum();
        for l in 0..k {
            let mean = gamma * (total - sums[l]) / n_rows;
            for j in 0..p {
                others[(j, l)] = row_sums[j] - squares[(j, l)] - mean;
            }
        }
        let value = 0.5 * squares.dot(&others) / n_rows;
        let size = squares.norm_squared() / n_rows;
        if !(value.is_finite() && size.is_finite()) {
            return None;
        }
        let by_pattern = others.component_mul(&pattern) * (2.0 / n_rows);
        let by_turn = -(pattern.transpose() * by_pattern * inverse).transpose();
        let mut slope = by_turn;
        for (mut column, along) in slope.column_iter_mut().zip(turn.column_iter()) {
            let part = column.dot(&along);
            column.axpy(-part, &along, 1.0);
        }
        Some(Position { turn, value, size, slope })
    }

    fn is_apart(&self) -> bool {
        self.turn.determinant().abs() > COLLAPSED
    }

    fn arrival(self, iterations: usize, gradient: f64) -> Arrival {
        Arrival { turn: self.turn, criterion: self.value, iterations, gradient }
    }
}
