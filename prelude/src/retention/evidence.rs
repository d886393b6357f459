//! Minka's approximation of the evidence: how well does the probabilistic model with k components
//! explain the table, averaged over all its parameters?

use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion, Reason};
use crate::components::Scaling;
use statrs::function::gamma::ln_gamma;

/// Variances closer than this, relative to the larger, are equal to within rounding.
const TIED: f64 = 1e-12;

/// The logarithm of the evidence for k from 0 to p − 1 components (equation 30 of the paper, by
/// Laplace's method), with v the mean of the p − k variances left and m = p k − k (k + 1)/2:
///
/// ```text
/// ln p(U) − (n/2) Σ_{j ≤ k} ln λ_j − n (p − k)/2 ln v + (m + k)/2 ln 2π − ½ ln|A| − (k/2) ln n
/// ln p(U) = −k ln 2 + Σ_{i ≤ k} [ ln Γ((p − i + 1)/2) − (p − i + 1)/2 ln π ]
/// ln|A| = Σ_{i ≤ k} Σ_{j > i} ln[ (1/λ̂_j − 1/λ̂_i) (λ_i − λ_j) n ],  λ̂_j = v for j > k, else λ_j
/// ```
pub(super) fn evidence(subject: &Subject) -> Answer {
    subject.needs_equal_rows()?;
    subject.needs_more_rows()?;
    subject.needs_full_rank()?;
    subject.needs_components(2)?;
    let roots = &subject.roots;
    if let Some(place) = roots.windows(2).position(|two| two[0] - two[1] <= TIED * two[0]) {
        return Err(Reason::Tied { component: place + 1 });
    }
    let values = (0..roots.len()).map(|k| log_evidence(roots, k, subject.n as f64)).collect();
    let answer = Comparison::new("log evidence", Criterion::Largest, values, Vec::new());
    Ok(match subject.pca.scaling() {
        Scaling::Covariance => answer,
        Scaling::Correlation => answer.with_remark(EQUAL_NOISE),
    })
}

/// What is said of models of equal noise in every variable when variables were rescaled.
pub(super) const EQUAL_NOISE: &str =
    "Assumes noise of the same size in every variable, after bringing each to unit variance.";

pub(super) fn log_evidence(roots: &[f64], k: usize, n: f64) -> f64 {
    let p = roots.len();
    let left = (p - k) as f64;
    let v = roots[k..].iter().sum::<f64>() / left;
    let ln_pi = std::f64::consts::PI.ln();
    let orientation: f64 = (1..=k)
        .map(|i| {
            let half = (p - i + 1) as f64 / 2.0;
            ln_gamma(half) - half * ln_pi - std::f64::consts::LN_2
        })
        .sum();
    let kept: f64 = roots[..k].iter().map(|root| root.ln()).sum();
    let assumed = |j: usize| if j < k { roots[j] } else { v };
    let mut curvature = 0.0;
    for i in 0..k {
        for j in i + 1..p {
            let inverse = 1.0 / assumed(j) - 1.0 / assumed(i);
            curvature += (inverse * (roots[i] - roots[j]) * n).ln();
        }
    }
    let (p, k) = (p as f64, k as f64);
    let m = p * k - k * (k + 1.0) / 2.0;
    orientation - 0.5 * n * kept - 0.5 * n * left * v.ln()
        + 0.5 * (m + k) * (std::f64::consts::LN_2 + ln_pi)
        - 0.5 * curvature
        - 0.5 * k * n.ln()
}
