//! Cross-validation cell by cell.
//!
//! The rows are left out in groups. Components come from the rows that stay; a cell of a row left
//! out is predicted from the other cells of its row, through the scores that fit those best. So
//! neither the components nor the scores have seen the value that is predicted.
//!
//! With P the p × k loadings of the rows that stay, x a row left out less their mean, t = Pᵀ x and
//! hⱼ the squared length of row j of P, leaving variable j out of the least-squares fit gives
//!
//! ```text
//! x_j − x̂_j = (x_j − p_jᵀ t) / (1 − h_j)
//! ```
//!
//! (the identity for leaving out one case in regression, D. M. Allen (1974), "The relationship
//! between variable selection and data augmentation and a method for prediction", Technometrics 16,
//! 125–127), so that no fit is repeated. With hⱼ = 1 the other variables say nothing of variable j,
//! and its mean is the prediction.

use nalgebra::{DMatrix, DVector};

use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion};
use crate::components::spectrum;
use crate::error::Result;
use crate::repeat::repeat;

/// Groups of rows when leaving out one row at a time would take long.
const GROUPS: usize = 20;

/// Below this, 1 − hⱼ is rounding.
const NOTHING: f64 = 1e-10;

pub(super) fn cell_validation(subject: &Subject) -> Result<Answer> {
    let n_groups = match groups(subject) {
        Ok(n_groups) => n_groups,
        Err(reason) => return Ok(Err(reason)),
    };
    let rows = subject.scaled_rows();
    let errors = prediction_errors(&rows, n_groups)?;
    let remark = if n_groups == subject.n {
        "One row at a time is left out.".to_owned()
    } else {
        format!("Every {n_groups}th row is left out at a time.")
    };
    let what = "squared error";
    Ok(Ok(Comparison::new(what, Criterion::Smallest, errors, Vec::new()).with_remark(remark)))
}

fn groups(subject: &Subject) -> std::result::Result<usize, super::verdict::Reason> {
    subject.needs_equal_rows()?;
    subject.needs_components(2)?;
    let (n, p) = (subject.n as f64, subject.p as f64);
    let side = n.min(p);
    let one = 10.0 * side.powi(3) + if p < n { 0.0 } else { n * n * p };
    let predictions = n * p * side;
    if subject.needs_time(n * one + predictions).is_ok() || subject.n <= GROUPS {
        return Ok(subject.n);
    }
    // Every group's cross-product is formed anew, from its own rows only.
    subject.needs_time(GROUPS as f64 * one + predictions + n * p * side)?;
    Ok(GROUPS)
}

/// The mean squared error of prediction for k from zero to the number of components that every
/// group of remaining rows has, less one.
pub(super) fn prediction_errors(x: &DMatrix<f64>, n_groups: usize) -> Result<Vec<f64>> {
    let (n, p) = x.shape();
    let most_left_out = n.div_ceil(n_groups);
    let n_kept = (n - most_left_out).saturating_sub(1).min(p).saturating_sub(1);
    // The cross-product of all rows, from which that of a group is taken off.
    let cross = (p < n).then(|| x.transpose() * x);
    let sums = repeat(
        "cross-validation",
        n_groups,
        0,
        || (),
        |_, _, group| {
            let left_out: Vec<usize> = (group..n).step_by(n_groups).collect();
            let away = x.select_rows(&left_out);
            let stay = (n - left_out.len()) as f64;
            // Columns sum to zero, so the mean of the rows that stay follows from the others.
            let mean: DVector<f64> = -away.row_sum().transpose() / stay;
            let loadings = match &cross {
                Some(cross) => {
                    let mut lower = cross - away.transpose() * &away;
                    lower.ger(-stay, &mean, &mean, 1.0);
                    spectrum::symmetric(lower)?.vectors.columns(0, n_kept).into_owned()
                }
                None => wide_loadings(x, &left_out, &mean, n_kept)?,
            };
            let mut sums = vec![0.0; n_kept + 1];
            for row in away.row_iter() {
                let row = row.transpose() - &mean;
                add_errors(&row, &loadings, &mut sums);
            }
            Ok(sums)
        },
    )?;
    let total = |k: usize| sums.iter().map(|sums| sums[k]).sum::<f64>();
    Ok((0..=n_kept).map(|k| total(k) / (n * p) as f64).collect())
}

/// Loadings from the rows' cross-product; directions without variance stay zero and predict
/// nothing.
fn wide_loadings(
    x: &DMatrix<f64>,
    left_out: &[usize],
    mean: &DVector<f64>,
    n_kept: usize,
) -> Result<DMatrix<f64>> {
    let stay: Vec<usize> = (0..x.nrows()).filter(|row| !left_out.contains(row)).collect();
    let mut rows = x.select_rows(&stay);
    for (j, mut column) in rows.column_iter_mut().enumerate() {
        column.add_scalar_mut(-mean[j]);
    }
    let spectrum = spectrum::symmetric(&rows * rows.transpose())?;
    let largest = spectrum.roots[0];
    let mut loadings = rows.transpose() * spectrum.vectors.columns(0, n_kept);
    for (mut column, root) in loadings.column_iter_mut().zip(spectrum.roots.iter()) {
        column *= if *root > largest * 1e-12 { 1.0 / root.sqrt() } else { 0.0 };
    }
    Ok(loadings)
}

/// Adds the squared errors of a row's cells for each number of components.
fn add_errors(row: &DVector<f64>, loadings: &DMatrix<f64>, sums: &mut [f64]) {
    sums[0] += row.norm_squared();
    let mut residual = row.clone();
    let mut unseen = DVector::repeat(row.len(), 1.0);
    for (k, loading) in loadings.column_iter().enumerate() {
        let score = loading.dot(row);
        let mut sum = 0.0;
        for j in 0..row.len() {
            residual[j] -= score * loading[j];
            unseen[j] -= loading[j] * loading[j];
            let error = if unseen[j] > NOTHING { residual[j] / unseen[j] } else { row[j] };
            sum += error * error;
        }
        sums[k + 1] += sum;
    }
}
