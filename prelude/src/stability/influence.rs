//! How much a little more weight of each row would move variances and loadings.

use nalgebra::{DMatrix, DVector};

use super::refit::Refit;
use crate::components::{PrincipalComponents, Scaling};
use crate::live::checkpoint;

/// The acceleration of the BCa intervals: a sixth of the skewness of the empirical influence
/// values (Efron 1987, equations 6.5 and 7.3).
pub(super) struct Accelerations {
    pub(super) variances: DVector<f64>,
    /// Of the followed loadings, column after column.
    pub(super) loadings: DVector<f64>,
}

/// From the derivatives of the decomposition by the weight of a row (Critchley 1985), with z the
/// centred and scaled row, y = Vᵀ z its scores and, under correlation, D = diag(zⱼ²):
///
/// ```text
/// variances:  y_k² − λ_k                                          (covariance)
///             y_k² − λ_k v_kᵀ D v_k                               (correlation)
/// loadings:   Σ_{l ≠ k} y_k y_l / (λ_k − λ_l) v_l                 (covariance)
///             Σ_{l ≠ k} (y_k y_l − ½ (λ_k + λ_l) v_lᵀ D v_k) / (λ_k − λ_l) v_l
///                 − ½ (I − V Vᵀ) D v_k                            (correlation)
/// ```
///
/// The last term belongs to directions in which the rows do not vary.
pub(super) fn accelerations(
    pca: &PrincipalComponents,
    refit: &Refit<'_>,
    k: usize,
) -> Accelerations {
    let (roots, vectors) = (pca.variances(), pca.loadings().values());
    let scores = refit.unit() * vectors;
    let (n, r) = scores.shape();
    let p = vectors.nrows();
    let squares = match pca.scaling() {
        Scaling::Covariance => None,
        Scaling::Correlation => Some(refit.unit().map(|z| z * z)),
    };
    let squared_vectors = vectors.map(|v| v * v);
    let scaled_anew = squares.as_ref().map(|squares| squares * squared_vectors);
    let variances = DVector::from_fn(r, |component, _| {
        let values = (0..n).map(|row| {
            let score = scores[(row, component)];
            let off = scaled_anew.as_ref().map_or(1.0, |own| own[(row, component)]);
            score * score - roots[component] * off
        });
        acceleration(values)
    });
    let mut loadings = DVector::zeros(p * k);
    for component in 0..k {
        checkpoint();
        let own = vectors.column(component);
        let root = roots[component];
        let mut parts =
            DMatrix::from_fn(n, r, |row, l| scores[(row, component)] * scores[(row, l)]);
        let mut outside = None;
        if let Some(squares) = &squares {
            let mut turned = squares.clone();
            for (mut column, v) in turned.column_iter_mut().zip(own.iter()) {
                column *= *v;
            }
            let inside = &turned * vectors;
            for (l, mut column) in parts.column_iter_mut().enumerate() {
                column.axpy(-0.5 * (root + roots[l]), &inside.column(l), 1.0);
            }
            if r < p {
                outside = Some((turned - &inside * vectors.transpose()) * -0.5);
            }
        }
        for (l, mut column) in parts.column_iter_mut().enumerate() {
            column *= if l == component { 0.0 } else { 1.0 / (root - roots[l]) };
        }
        let mut influence = parts * vectors.transpose();
        if let Some(outside) = outside {
            influence += outside;
        }
        for (j, column) in influence.column_iter().enumerate() {
            loadings[component * p + j] = acceleration(column.iter().copied());
        }
    }
    Accelerations { variances, loadings }
}

/// Σ U³ / (6 (Σ U²)^(3/2)); NaN when nothing influences the quantity.
fn acceleration(influences: impl Iterator<Item = f64>) -> f64 {
    let (mut squares, mut cubes) = (0.0, 0.0);
    for influence in influences {
        squares += influence * influence;
        cubes += influence * influence * influence;
    }
    cubes / (6.0 * squares * f64::sqrt(squares))
}
