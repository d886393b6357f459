//! Cross-validation by leaving out a row and a column at a time.
//!
//! Each cell is predicted from two decompositions that have not seen it: loadings from the table
//! without its row, scores from the table without its column.
//!
//! ```text
//! x̂_ij(M) = Σ_{t ≤ M} (ũ_it √d̃_t) (√d̄_t v̄_jt)
//! PRESS(M) = (1/np) Σ_ij (x̂_ij(M) − x_ij)²
//! W_M = [PRESS(M − 1) − PRESS(M)] / D_M ÷ PRESS(M) / D_r
//! D_M = n + p − 2M,  D_r = p (n − 1) − Σ_{t ≤ M} D_t
//! ```
//!
//! with d̄, v̄ from the table without row i and d̃, ũ from the table without column j, each vector
//! turned to agree in sign with that of the whole table. Columns are centred and scaled once, from
//! all rows. Components up to the last with W above one are kept: W need not decline, so that the
//! first below one is no place to stop (Jolliffe 2002, section 6.1.5). The limit is to be taken with
//! some latitude (0.9 has been used, from memory), and all values of W are in the comparison.
//! Components of nearly equal variance mix between the decompositions, which makes W erratic.

use nalgebra::{DMatrix, DVector};

use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion, Reason};
use crate::components::spectrum;
use crate::error::Result;
use crate::repeat::repeat;

pub(super) fn row_column_validation(subject: &Subject) -> Result<Answer> {
    if let Err(reason) = fits(subject) {
        return Ok(Err(reason));
    }
    let rows = subject.scaled_rows();
    let press = press(&rows, subject.pca.n_components() - 1)?;
    let values = gains(&press, subject.n, subject.p);
    let thresholds = vec![1.0; values.len()];
    Ok(Ok(Comparison::new("W", Criterion::LastAbove, values, thresholds)))
}

fn fits(subject: &Subject) -> std::result::Result<(), Reason> {
    subject.needs_equal_rows()?;
    let rank = subject.pca.n_components();
    if rank < 2 {
        return Err(Reason::TooFewComponents { needed: 2, found: rank });
    }
    let (n, p) = (subject.n as f64, subject.p as f64);
    let (side, long) = (n.min(p), n.max(p));
    subject.needs_time((n + p) * 10.0 * side.powi(3) + long * side.powi(3))
}

/// W for each number of components from one.
pub(super) fn gains(press: &[f64], n: usize, p: usize) -> Vec<f64> {
    let mut left = (p * (n - 1)) as f64;
    press
        .windows(2)
        .enumerate()
        .map(|(place, pair)| {
            let taken = (n + p) as f64 - 2.0 * (place + 1) as f64;
            left -= taken;
            (pair[0] - pair[1]) / taken / (pair[1] / left)
        })
        .collect()
}

/// PRESS for M from zero to `most`. Rows and columns have the same part in it, so that a wide
/// table is taken as its transpose.
pub(super) fn press(x: &DMatrix<f64>, most: usize) -> Result<Vec<f64>> {
    let turned;
    let x = if x.ncols() <= x.nrows() {
        x
    } else {
        turned = x.transpose();
        &turned
    };
    let (n, p) = x.shape();
    let cross = x.transpose() * x;
    let whole = spectrum::symmetric(cross.clone())?.vectors;
    let without_column = repeat(
        "cross-validation, columns",
        p,
        0,
        || (),
        |_, _, column| scores_without_column(&cross, &whole, column, most),
    )?;
    let rows = repeat(
        "cross-validation, rows",
        n,
        0,
        || (),
        |_, _, row| {
            let values = x.row(row).transpose();
            let loadings = loadings_without_row(&cross, &whole, &values, most)?;
            Ok(squared_errors(&values, &loadings, &without_column))
        },
    )?;
    let total = |k: usize| rows.iter().map(|sums| sums[k]).sum::<f64>();
    Ok((0..=most).map(|k| total(k) / (n * p) as f64).collect())
}

/// v̄_jt √d̄_t as columns, from the cross-product without one row.
fn loadings_without_row(
    cross: &DMatrix<f64>,
    whole: &DMatrix<f64>,
    row: &DVector<f64>,
    most: usize,
) -> Result<DMatrix<f64>> {
    let mut lower = cross.clone();
    lower.ger(-1.0, row, row, 1.0);
    let spectrum = spectrum::symmetric(lower)?;
    let mut loadings = spectrum.vectors.columns(0, most).into_owned();
    for (t, mut loading) in loadings.column_iter_mut().enumerate() {
        let sign = loading.dot(&whole.column(t)).signum();
        // √d̄ is the fourth root of the eigenvalue d̄².
        loading *= sign * spectrum.roots[t].max(0.0).sqrt().sqrt();
    }
    Ok(loadings)
}

/// What a row is multiplied by to give ũ_it √d̃_t, as columns, from the cross-product without one
/// column: ũ_t = X ṽ_t / d̃_t. The entry of the column left out is zero.
fn scores_without_column(
    cross: &DMatrix<f64>,
    whole: &DMatrix<f64>,
    column: usize,
    most: usize,
) -> Result<DMatrix<f64>> {
    let lower = cross.clone().remove_row(column).remove_column(column);
    let spectrum = spectrum::symmetric(lower)?;
    let mut multipliers = spectrum.vectors.columns(0, most).into_owned().insert_row(column, 0.0);
    let tolerance = spectrum.roots[0] * f64::EPSILON * cross.nrows() as f64;
    for (t, mut multiplier) in multipliers.column_iter_mut().enumerate() {
        // ũᵀ u has the sign of ṽᵀ X̃ᵀ X v, since singular values are positive.
        let sign = multiplier.dot(&(cross * whole.column(t))).signum();
        let root = spectrum.roots[t];
        // A direction without variance predicts nothing.
        let size = if root > tolerance { 1.0 / root.sqrt().sqrt() } else { 0.0 };
        multiplier *= sign * size;
    }
    Ok(multipliers)
}

/// The sums over a row's cells of squared errors for M from zero.
fn squared_errors(
    row: &DVector<f64>,
    loadings: &DMatrix<f64>,
    without_column: &[DMatrix<f64>],
) -> Vec<f64> {
    let most = loadings.ncols();
    let mut sums = vec![0.0; most + 1];
    for (j, multipliers) in without_column.iter().enumerate() {
        let mut error = row[j];
        sums[0] += error * error;
        for t in 0..most {
            error -= multipliers.column(t).dot(row) * loadings[(j, t)];
            sums[t + 1] += error * error;
        }
    }
    sums
}
