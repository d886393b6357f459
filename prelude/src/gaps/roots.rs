//! The components of a matrix without holes, as the steps of both methods need them.

use nalgebra::{DMatrix, DVector};

use crate::components::cross::{self, CrossProduct};
use crate::components::scores::Standardised;
use crate::components::spectrum;
use crate::error::{Error, Result};
use crate::live::interrupted;

/// Centre and scale of the columns, and their components. The divisor of variances is n.
pub(super) struct Roots {
    pub(super) mean: DVector<f64>,
    /// Standard deviations (divisor n − 1, as everywhere), or ones.
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
        let scale = scale(unit, &lower.diagonal(), n);
        lower /= n as f64;
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
    let scale = scale(unit, &moments.sum_squares, n);
    lower /= n as f64;
    let spectrum = spectrum::symmetric(lower)?;
    let mut weights = spectrum.vectors.columns(0, n_components).into_owned();
    for (mut column, variance) in weights.column_iter_mut().zip(spectrum.roots.iter()) {
        // A component without variance has no axis; it stays zero.
        let length = (variance * n as f64).sqrt();
        column *= if length > 0.0 { 1.0 / length } else { 0.0 };
    }
    let standardised = Standardised { x, mean: &moments.mean, scale: &scale, weights: None };
    let axes = standardised.transposed_times(&weights);
    stop()?;
    Ok(Roots { mean: moments.mean, scale, variances: spectrum.roots, axes })
}

fn scale(unit: bool, sum_squares: &DVector<f64>, n: usize) -> DVector<f64> {
    let deviation = |squares: f64| (squares / (n - 1) as f64).sqrt();
    if unit { sum_squares.map(deviation) } else { DVector::repeat(sum_squares.len(), 1.0) }
}

fn stop() -> Result<()> {
    if interrupted() { Err(Error::Interrupted) } else { Ok(()) }
}
