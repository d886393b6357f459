//! Minimum average partial: components are taken out while what is left of the correlations,
//! on average, still becomes smaller.

use nalgebra::DMatrix;

use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion};
use crate::live::{checkpoint, interrupted};

/// What is left of a variable's variance below which its partial correlations are rounding.
const NOTHING: f64 = 1e-10;

/// The mean over pairs of variables of the squared (or fourth) power of their correlation after
/// the first k components were taken out, for k from zero.
///
/// ```text
/// C_k = R − Σ_{t ≤ k} λ_t v_t v_tᵀ
/// f_k = Σ_{i ≠ j} |c_ij / √(c_ii c_jj)|^power / (p (p − 1))
/// ```
pub(super) fn average_partial(subject: &Subject, power: i32) -> Answer {
    subject.needs_correlation()?;
    subject.needs_components(3)?;
    let p = subject.p;
    let rank = subject.pca.n_components();
    subject.needs_usual_time(rank as f64 * 2.0 * (p * p) as f64)?;
    let structure = subject.pca.structure();
    let structure = structure.values();
    let mut left: DMatrix<f64> = structure * structure.transpose();
    let mut values = Vec::with_capacity(rank);
    for k in 0..rank.min(p - 1) {
        if interrupted() {
            checkpoint();
        }
        if k > 0 {
            let taken = structure.column(k - 1);
            left.ger(-1.0, &taken, &taken, 1.0);
        }
        let Some(value) = mean_power(&left, power) else { break };
        values.push(value);
    }
    let what = if power == 2 { "squared partial" } else { "fourth power" };
    Ok(Comparison::new(what, Criterion::Smallest, values, Vec::new()))
}

/// `None` once a variable has no variance left.
fn mean_power(left: &DMatrix<f64>, power: i32) -> Option<f64> {
    let p = left.nrows();
    let deviations: Vec<f64> = left.diagonal().iter().map(|variance| variance.sqrt()).collect();
    // The negated test also stops at roots of negative rounding.
    if deviations.iter().any(|deviation| !(*deviation > NOTHING.sqrt())) {
        return None;
    }
    let mut sum = 0.0;
    for (j, column) in left.column_iter().enumerate() {
        for i in j + 1..p {
            sum += (column[i] / (deviations[i] * deviations[j])).powi(power);
        }
    }
    Some(2.0 * sum / (p * (p - 1)) as f64)
}
