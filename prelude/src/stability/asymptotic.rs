//! What theory says of variances and loadings of normal rows.

use nalgebra::{DMatrix, DVector};

use super::options::AsymptoticOptions;
use super::result::{AsymptoticErrors, Bands};
use crate::components::{PrincipalComponents, Scaling, principal_components};
use crate::distributions::normal_upper_quantile;
use crate::error::{Error, Result};
use crate::live::checkpoint;
use crate::table::NamedMatrix;

/// Standard errors and intervals for variances and loadings, by theory for many normal rows.
///
/// With m = n − 1, λₖ the variances and vₖ the loadings, for components of the covariance matrix
/// (Girshick 1939; Anderson 1963):
///
/// ```text
/// var(λ̂_k) = 2 λ_k² / m              interval from λ̂_k / (1 + z √(2/m)) to λ̂_k / (1 − z √(2/m))
/// var(v̂_k) = λ_k / m · Σ_{l ≠ k} λ_l / (λ_l − λ_k)² v_l v_lᵀ
/// ```
///
/// Those of a correlation matrix spread less, since every resample is scaled anew, and the
/// formulas above would be wrong. With R = (ρᵢⱼ) the correlation matrix (Girshick 1939; S. Konishi
/// (1979), "Asymptotic expansions for the distributions of statistics based on the sample
/// correlation matrix in principal component analysis", Hiroshima Mathematical Journal 9, 647–700):
///
/// ```text
/// var(λ̂_k) = 2 λ_k² / m · (1 − 2 λ_k Σ_i v_ik⁴ + Σ_ij v_ik² v_jk² ρ_ij²)
/// var(v̂_k) = 1 / m · Σ_{l, h ≠ k} q_lh / ((λ_k − λ_l)(λ_k − λ_h)) v_l v_hᵀ
/// q_lh = λ_k λ_l δ_lh − λ_k (λ_l (λ_k + λ_h) + λ_h (λ_k + λ_l)) S_lh + ½ (λ_k + λ_l)(λ_k + λ_h) T_lh
/// S_lh = Σ_i v_ik² v_il v_ih,   T_lh = Σ_ij v_ik v_il ρ_ij² v_jk v_jh
/// ```
///
/// and the interval of a variance is λ̂ exp(∓ z s / λ̂) with s its standard error. Loadings get the
/// loading ∓ z times its standard error. All components of the population must differ in variance;
/// where two are close, errors of their loadings grow without bound and say so.
///
/// ```
/// use semiaxis::components::{Scaling, principal_components};
/// use semiaxis::nalgebra::DMatrix;
/// use semiaxis::stability::{AsymptoticOptions, asymptotic_errors};
/// use semiaxis::table::DataMatrix;
///
/// let x = DMatrix::from_fn(51, 2, |i, j| (i as f64 * (1.3 + j as f64)).sin() + i as f64 * 0.1);
/// let pca = principal_components(&DataMatrix::from_unnamed(x)?, Scaling::Covariance)?;
/// let errors = asymptotic_errors(&pca, AsymptoticOptions::new())?;
/// // √(2 / 50) is a fifth of the variance.
/// assert!((errors.variance_errors()[0] / pca.variances()[0] - 0.2).abs() < 1e-12);
/// # Ok::<(), semiaxis::Error>(())
/// ```
///
/// # Errors
///
/// [`Error::TooFewRows`] unless n > p + 1; [`Error::WeightsNotCovered`];
/// [`Error::SingularScatter`] when variables can be computed from others;
/// [`Error::OptionOutOfRange`].
pub fn asymptotic_errors(
    pca: &PrincipalComponents,
    options: AsymptoticOptions,
) -> Result<AsymptoticErrors> {
    options.check()?;
    let method = "the theory of sampling errors";
    check_unweighted(pca, method)?;
    let (n, p) = (pca.n_rows(), pca.n_variables());
    if n < p + 2 {
        return Err(Error::TooFewRows { method, needed: p + 2, found: n });
    }
    let whole = with_all_components(pca)?;
    let pca = whole.as_ref().unwrap_or(pca);
    if pca.n_components() < p {
        return Err(Error::SingularScatter { method, rank: pca.n_components(), order: p });
    }
    let m = (n - 1) as f64;
    let roots = pca.variances();
    let vectors = pca.loadings().values();
    let quantile = normal_upper_quantile(0.5 * (1.0 - options.chosen_confidence()));
    let squared_correlations = match pca.scaling() {
        Scaling::Covariance => None,
        Scaling::Correlation => Some(correlations(roots, vectors).map(|r| r * r)),
    };
    let mut variance_errors = DVector::zeros(p);
    let mut loading_errors = DMatrix::zeros(p, p);
    for k in 0..p {
        checkpoint();
        let covariance = match &squared_correlations {
            None => of_covariances(roots, k),
            Some(squares) => of_correlations(roots, vectors, squares, k),
        };
        variance_errors[k] = (covariance.variance / m).max(0.0).sqrt();
        let mut directions = vectors.clone();
        for (l, mut column) in directions.column_iter_mut().enumerate() {
            column *= if l == k { 0.0 } else { 1.0 / (roots[k] - roots[l]) };
        }
        let spread = &directions * covariance.mixing;
        for j in 0..p {
            let variance = spread.row(j).dot(&directions.row(j)) / m;
            loading_errors[(j, k)] = variance.max(0.0).sqrt();
        }
    }
    let direction_errors = DVector::from_fn(p, |k, _| loading_errors.column(k).norm().to_degrees());
    Ok(AsymptoticErrors {
        variances: roots.clone(),
        variance_bands: bands(pca, &variance_errors, quantile),
        variance_errors,
        loadings: pca.loadings().clone(),
        loading_errors: NamedMatrix::new(
            loading_errors,
            pca.loadings().row_names(),
            pca.loadings().column_names(),
        )?,
        direction_errors,
        quantile,
        confidence: options.chosen_confidence(),
        n_rows: n,
        scaling: pca.scaling(),
    })
}

/// Refuses weighted rows: their number no longer says how much is known.
pub(super) fn check_unweighted(pca: &PrincipalComponents, method: &'static str) -> Result<()> {
    match pca.row_weights() {
        Some(_) => Err(Error::WeightsNotCovered { method }),
        None => Ok(()),
    }
}

/// The analysis with all its components, where some were left out when it was made.
pub(super) fn with_all_components(
    pca: &PrincipalComponents,
) -> Result<Option<PrincipalComponents>> {
    if pca.is_complete() && pca.approximation().is_none() {
        return Ok(None);
    }
    principal_components(pca.data(), pca.scaling()).map(Some)
}

/// n − 1 times the variance of a component's variance, and n − 1 times the covariances of the
/// numerators q_l whose quotients by λₖ − λₗ are the part of each other component in v̂ₖ.
struct Numerators {
    variance: f64,
    mixing: DMatrix<f64>,
}

fn of_covariances(roots: &DVector<f64>, k: usize) -> Numerators {
    Numerators {
        variance: 2.0 * roots[k] * roots[k],
        mixing: DMatrix::from_diagonal(&(roots * roots[k])),
    }
}

/// A change of the rows changes R to first order by z zᵀ − ½ (D R + R D) with D = diag(zᵢ²), so
/// that
///
/// ```text
/// dλ_k = y_k² − λ_k Σ_i v_ik² z_i²
/// q_l  = y_k y_l − ½ (λ_k + λ_l) Σ_i v_ik v_il z_i²,   y = Vᵀ z
/// ```
///
/// and for normal z the covariance of two quadratic forms zᵀ A z and zᵀ B z is 2 tr(A R B R).
fn of_correlations(
    roots: &DVector<f64>,
    vectors: &DMatrix<f64>,
    squared_correlations: &DMatrix<f64>,
    k: usize,
) -> Numerators {
    let p = roots.len();
    let root = roots[k];
    let own = vectors.column(k);
    let weighted =
        |by: &dyn Fn(usize) -> f64| DMatrix::from_fn(p, p, |i, l| by(i) * vectors[(i, l)]);
    // S_lh = Σ_i v_ik² v_il v_ih and T_lh = Σ_ij v_ik v_il ρ_ij² v_jk v_jh.
    let s = vectors.tr_mul(&weighted(&|i| own[i] * own[i]));
    let by_own = weighted(&|i| own[i]);
    let t = by_own.tr_mul(&(squared_correlations * &by_own));
    let variance = 2.0 * root * root * (1.0 - 2.0 * root * s[(k, k)] + t[(k, k)]);
    let mixing = DMatrix::from_fn(p, p, |l, h| {
        let (a, b) = (roots[l], roots[h]);
        let same = if l == h { root * a } else { 0.0 };
        same - root * ((root + b) * a + (root + a) * b) * s[(l, h)]
            + 0.5 * (root + a) * (root + b) * t[(l, h)]
    });
    Numerators { variance, mixing }
}

/// The correlation matrix put together again from all of its components.
fn correlations(roots: &DVector<f64>, vectors: &DMatrix<f64>) -> DMatrix<f64> {
    let mut scaled = vectors.clone();
    for (mut column, root) in scaled.column_iter_mut().zip(roots.iter()) {
        column *= *root;
    }
    scaled * vectors.transpose()
}

fn bands(pca: &PrincipalComponents, errors: &DVector<f64>, quantile: f64) -> Bands {
    let roots = pca.variances();
    match pca.scaling() {
        Scaling::Covariance => {
            let reach = quantile * (2.0 / (pca.n_rows() - 1) as f64).sqrt();
            let high = if reach < 1.0 { 1.0 / (1.0 - reach) } else { f64::INFINITY };
            Bands { low: roots / (1.0 + reach), high: roots * high }
        }
        Scaling::Correlation => {
            let ratio =
                DVector::from_fn(roots.len(), |k, _| (quantile * errors[k] / roots[k]).exp());
            Bands { low: roots.component_div(&ratio), high: roots.component_mul(&ratio) }
        }
    }
}
