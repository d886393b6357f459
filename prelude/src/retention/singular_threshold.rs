//! The hard threshold for singular values that recovers a table best when the noise is of unknown
//! size.
//!
//! With β the ratio of the smaller to the larger side of the table and σ̃ the median of its
//! singular values, those above ω(β) σ̃ are kept (equations 4, 7 and 8 of the paper):
//!
//! ```text
//! ω(β) = λ*(β) / √μ_β,  λ*(β) = √( 2 (β + 1) + 8β / ((β + 1) + √(β² + 14β + 1)) )
//! ```
//!
//! with μ_β the median of the Marčenko–Pastur law. Centring takes one of the n rows away, so that
//! the sides are n − 1 and p.

use super::evidence::EQUAL_NOISE;
use super::quadrature::gauss_legendre;
use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion, Reason};
use crate::components::Scaling;
use crate::quantile::median;

pub(super) fn singular_threshold(subject: &Subject) -> Answer {
    subject.needs_equal_rows()?;
    subject.needs_components(2)?;
    let rows = (subject.n - 1) as f64;
    let singular: Vec<f64> = subject.roots.iter().map(|root| (root * rows).sqrt()).collect();
    let middle = median(singular.clone());
    if middle <= 0.0 {
        let (rank, m) = (subject.pca.n_components(), subject.roots.len());
        return Err(Reason::RankDeficient { rank, needed: m / 2 + 1 });
    }
    let columns = subject.p as f64;
    let omega = coefficient(rows.min(columns) / rows.max(columns));
    let thresholds = vec![omega * middle; singular.len()];
    let answer = Comparison::new("singular value", Criterion::Above, singular, thresholds);
    Ok(match subject.pca.scaling() {
        Scaling::Covariance => answer,
        Scaling::Correlation => answer.with_remark(EQUAL_NOISE),
    })
}

/// ω(β) for 0 < β ≤ 1.
pub(super) fn coefficient(beta: f64) -> f64 {
    let sum = beta + 1.0;
    let lambda = (2.0 * sum + 8.0 * beta / (sum + (beta * beta + 14.0 * beta + 1.0).sqrt())).sqrt();
    lambda / marchenko_pastur_median(beta).sqrt()
}

/// The median of the Marčenko–Pastur law with unit variance and ratio β.
///
/// With t = 1 + β + 2√β cos φ the share above t is
///
/// ```text
/// (2/π) ∫₀^φ sin²θ / (1 + β + 2√β cos θ) dθ
/// ```
///
/// which is smooth wherever the median can lie, so that few nodes give every digit.
fn marchenko_pastur_median(beta: f64) -> f64 {
    let rule = gauss_legendre(40);
    let at = |angle: f64| 1.0 + beta + 2.0 * beta.sqrt() * angle.cos();
    let share_above = |angle: f64| {
        let pairs = rule.nodes.iter().zip(&rule.weights);
        let sum: f64 = pairs.map(|(x, w)| w * (x * angle).sin().powi(2) / at(x * angle)).sum();
        sum * angle * std::f64::consts::FRAC_2_PI
    };
    let (mut low, mut high) = (0.0, std::f64::consts::PI);
    // Each step halves an interval of width π; 60 leave nothing a double could tell.
    for _ in 0..60 {
        let middle = 0.5 * (low + high);
        if share_above(middle) < 0.5 { low = middle } else { high = middle }
    }
    at(0.5 * (low + high))
}
