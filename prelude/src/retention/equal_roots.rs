//! Tests, in sequence, that the roots still left are equal in the population.
//!
//! After k components, q = p − k roots are left, with arithmetic mean a and geometric mean g. Each
//! test refers
//!
//! ```text
//! c_k q ln(a / g)
//! ```
//!
//! to the chi-squared distribution with (q − 1)(q + 2)/2 degrees of freedom. A component is kept
//! when the roots from it on are found to differ; the sequence ends at the first test that does
//! not find so. The level is that of each test, not of the sequence.

use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion, Reason};
use crate::distributions::chi_squared_upper_tail;

/// For correlations; c_k = n − 1 − (2p + 5)/6 − 2k/3. With nothing removed the hypothesis is that
/// of no correlation at all, which has p(p − 1)/2 degrees of freedom.
pub(super) fn bartlett(subject: &Subject) -> Answer {
    subject.needs_correlation()?;
    let (n, p) = (subject.n as f64, subject.p as f64);
    in_sequence(subject, true, |k, _| n - 1.0 - (2.0 * p + 5.0) / 6.0 - 2.0 * k as f64 / 3.0)
}

/// For covariances, and approximately for correlations;
/// c_k = n − 1 − k − (2q + 1 + 2/q)/6 + a² Σ_{i ≤ k} (λ_i − a)^−2.
pub(super) fn lawley(subject: &Subject) -> Answer {
    let correlations = subject.needs_correlation().is_ok();
    let n = subject.n as f64;
    let answer = in_sequence(subject, correlations, |k, left| {
        let (q, a) = (left.len() as f64, mean(left));
        let apart: f64 = subject.roots[..k].iter().map(|root| (a / (root - a)).powi(2)).sum();
        n - 1.0 - k as f64 - (2.0 * q + 1.0 + 2.0 / q) / 6.0 + apart
    })?;
    Ok(if correlations { answer.with_remark("Approximate for correlations.") } else { answer })
}

/// For covariances; c_k = n − (2p + 11)/6, Bartlett's factor as K. V. Mardia, J. T. Kent and
/// J. M. Bibby (1979) give it in section 8.4.3 (from memory).
pub(super) fn likelihood_ratio(subject: &Subject) -> Answer {
    subject.needs_covariance()?;
    let (n, p) = (subject.n as f64, subject.p as f64);
    in_sequence(subject, false, |_, _| n - (2.0 * p + 11.0) / 6.0)
}

fn in_sequence(
    subject: &Subject,
    fixed_diagonal: bool,
    factor: impl Fn(usize, &[f64]) -> f64,
) -> Answer {
    subject.needs_equal_rows()?;
    subject.needs_more_rows()?;
    subject.needs_full_rank()?;
    subject.needs_components(2)?;
    subject.needs_normal_rows()?;
    let (roots, p) = (&subject.roots, subject.p);
    let level = subject.options.chosen_level();
    let mut values = Vec::new();
    for k in 0..p - 1 {
        let left = &roots[k..];
        let factor = factor(k, left);
        if factor <= 0.0 {
            // So few rows that the approximation has nothing left to stand on.
            return Err(Reason::NeedsMoreRows { n_rows: subject.n, n_variables: p });
        }
        let q = left.len() as f64;
        let freedom = if k == 0 && fixed_diagonal {
            0.5 * q * (q - 1.0)
        } else {
            0.5 * (q - 1.0) * (q + 2.0)
        };
        let value = chi_squared_upper_tail(factor * unlikeness(left), freedom);
        values.push(value);
        if !(value < level) {
            break;
        }
    }
    let thresholds = vec![level; values.len()];
    Ok(Comparison::new("p-value", Criterion::Below, values, thresholds))
}

/// q ln(a / g), taken term by term so that roots close to one another keep their digits.
fn unlikeness(left: &[f64]) -> f64 {
    let a = mean(left);
    -left.iter().map(|root| ((root - a) / a).ln_1p()).sum::<f64>()
}

fn mean(left: &[f64]) -> f64 {
    left.iter().sum::<f64>() / left.len() as f64
}
