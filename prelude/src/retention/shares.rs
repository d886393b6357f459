//! Rules that hold variances against a share, their mean, or the pieces of a broken stick.

use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion};

/// The part of the mean root that Jolliffe (1972) found to serve best on samples.
const LOWER: f64 = 0.7;

pub(super) fn cumulative_share(subject: &Subject) -> Answer {
    let mut sum = 0.0;
    let values: Vec<f64> = subject
        .roots
        .iter()
        .map(|root| {
            sum += root;
            sum / subject.total
        })
        .collect();
    let thresholds = vec![subject.options.chosen_share(); values.len()];
    Ok(Comparison::new("share", Criterion::Reaches, values, thresholds)
        .with_remark("The share to reach is a matter of taste."))
}

pub(super) fn mean_root(subject: &Subject) -> Answer {
    above_mean(subject, 1.0)
}

pub(super) fn lower_mean_root(subject: &Subject) -> Answer {
    above_mean(subject, LOWER)
}

/// With p ≥ n at most n − 1 variances differ from zero, and nearly all of those lie above a mean
/// over p.
fn above_mean(subject: &Subject, part: f64) -> Answer {
    subject.needs_more_rows()?;
    let thresholds = vec![part * subject.mean_root(); subject.roots.len()];
    Ok(Comparison::new("variance", Criterion::Above, subject.roots.clone(), thresholds))
}

pub(super) fn broken_stick(subject: &Subject) -> Answer {
    let thresholds = pieces(subject.roots.len(), subject.total);
    Ok(Comparison::new("variance", Criterion::Above, subject.roots.clone(), thresholds))
}

/// The mean lengths of the longest, second longest and so on of m pieces of a stick.
///
/// ```text
/// b_k = (total / m) Σ_{i = k}^{m} 1 / i
/// ```
pub(super) fn pieces(m: usize, total: f64) -> Vec<f64> {
    let mut sum = 0.0;
    let mut pieces: Vec<f64> = (1..=m)
        .rev()
        .map(|i| {
            sum += 1.0 / i as f64;
            total * sum / m as f64
        })
        .collect();
    pieces.reverse();
    pieces
}
