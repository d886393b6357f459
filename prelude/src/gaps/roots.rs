//! The components of a matrix without holes, as the steps of both methods need them.

use nalgebra::{DMatrix, DVector};

use crate::components::cross::{self, CrossProduct};
use crate::components::scores::combine_rows;
use crate::components::spectrum;
use crate::error::{Error, Result};
use crate::live::interrupted;

/// Centre and scale of the columns, and their components. The divisor of variances is n.
pub(super) struct Roots {
    pub(super) mean: DVector<f64>,
    /// Standard deviations, or ones.
    pub(super) scale: DVector<f64>,
    /// Descending; min(n, p) of them, the last being zero to within rounding where n ≤ p.
    pub(super) variances: DVector<f64>,
    /// Unit length, one column for each of the leading components that were asked for.
    pub(super) axes: DMatrix<f64>,
}

/// Decomposes a matrix, its columns brought to unit variance if `unit`, by its smaller
/// cross-product.
pub(super) fn roots(x: &DMatrix<f64>, unit: bool, n_components: usize) -> Result<Roots> {
    let (n, p) = x.shape();
    if p <= n {
        let CrossProduct { mean, mut lower } = cross::of_columns(x, None);
        stop()?;
        lower /= n as f64;
        let scale = scale(unit, &lower.diagonal());
        for (j, mut column) in lower.column_iter_mut().enumerate() {
            for i in j..p {
                column[i] /= scale[i] * scale[j];
            }
        }
        let spectrum = spectrum::symmetric(lower)?;
        let axes = spectrum.vectors.columns(0, n_components).into_owned();
        return Ok(Roots { mean, scale, variances: spectrum.roots, axes });
    }
    let (moments, mut lower) = cross::of_rows(x, unit, None);
    stop()?;
    let scale = scale(unit, &(moments.sum_squares / n as f64));
    // The product of rows scales columns with the divisor n − 1, here n stands throughout.
    lower /= if unit { (n - 1) as f64 } else { n as f64 };
    let spectrum = spectrum::symmetric(lower)?;
    let mut weights = spectrum.vectors.columns(0, n_components).into_owned();
    for (mut column, variance) in weights.column_iter_mut().zip(spectrum.roots.iter()) {
        // A component without variance has no axis; it stays zero.
        let length = (variance * n as f64).sqrt();
        column *= if length > 0.0 { 1.0 / length } else { 0.0 };
    }
    let axes = combine_rows(x, &moments.mean, &scale, &weights);
    Ok(Roots { mean: moments.mean, scale, variances: spectrum.roots, axes })
}

fn scale(unit: bool, variances: &DVector<f64>) -> DVector<f64> {
    if unit { variances.map(f64::sqrt) } else { DVector::repeat(variances.len(), 1.0) }
}

fn stop() -> Result<()> {
    if interrupted() { Err(Error::Interrupted) } else { Ok(()) }
}
