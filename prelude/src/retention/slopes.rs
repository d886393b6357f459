//! The scree plot in numbers: where it bends, and what lies above the line through its tail.

use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion};

/// The second difference of the variances; the components before the sharpest bend are kept.
///
/// ```text
/// a_i = λ_{i+1} − 2 λ_i + λ_{i−1},  i from 2;  keep i − 1 for the largest a_i
/// ```
pub(super) fn acceleration(subject: &Subject) -> Answer {
    subject.needs_components(3)?;
    // Keeping no component is never the answer.
    let bends = subject.roots.windows(3).map(|three| three[2] - 2.0 * three[1] + three[0]);
    let values: Vec<f64> = std::iter::once(f64::NEG_INFINITY).chain(bends).collect();
    Ok(Comparison::new("second difference", Criterion::Largest, values, Vec::new())
        .with_remark("It always keeps at least one component, noise or not."))
}

/// Each variance against the value that the line through the next and the last one takes there,
/// and against the mean root.
///
/// ```text
/// λ̂_i = λ_{i+1} − (λ_m − λ_{i+1}) / (m − i − 1)
/// ```
pub(super) fn optimal_coordinates(subject: &Subject) -> Answer {
    subject.needs_components(3)?;
    subject.needs_more_rows()?;
    let roots = &subject.roots;
    let m = roots.len();
    let last = roots[m - 1];
    let thresholds: Vec<f64> = (0..m)
        .map(|place| match m.checked_sub(place + 2) {
            Some(steps) if steps > 0 => {
                let next = roots[place + 1];
                (next - (last - next) / steps as f64).max(subject.mean_root())
            }
            // Two points are left at most, and every line goes through them.
            _ => f64::INFINITY,
        })
        .collect();
    Ok(Comparison::new("variance", Criterion::Above, roots.clone(), thresholds)
        .with_remark("The threshold is the line's value or the mean root, whichever is higher."))
}
