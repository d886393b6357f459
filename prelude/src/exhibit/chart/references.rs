//! What a scree compares the variances with.

use super::palette::{GROUPS, INK_SOFT};
use super::settings::{Reference, Settings};
use super::source::Source;
use crate::exhibit::numbers::{grouped, stored};

/// A reference as it is drawn: one value for each component.
pub(super) struct Line {
    pub name: String,
    pub values: Vec<f64>,
    pub color: &'static str,
    pub dashes: &'static str,
}

/// The references that were asked for, or the mean variance.
pub(super) fn lines(source: &Source, settings: &Settings) -> Vec<Line> {
    let usual = [Reference::MeanVariance];
    let references = if settings.references.is_empty() { &usual[..] } else { &settings.references };
    references.iter().map(|reference| line(reference, source)).collect()
}

fn line(reference: &Reference, source: &Source) -> Line {
    let n_variables = source.variables.len();
    let mean = source.total_variance / n_variables as f64;
    match reference {
        Reference::MeanVariance => Line {
            name: format!("mean variance of the variables: {}", stored(mean, 4)),
            values: vec![mean; source.n_components()],
            color: INK_SOFT,
            dashes: "7 4",
        },
        Reference::BrokenStick => Line {
            name: "broken stick".to_owned(),
            values: broken_stick(n_variables, source.n_components(), source.total_variance),
            color: GROUPS[3],
            dashes: "2 3",
        },
        Reference::Noise(analysis) => Line {
            name: format!(
                "noise: percentile {} of {} tables",
                stored(analysis.percentile(), 4),
                grouped(analysis.n_replicates())
            ),
            values: analysis.noise_percentile().iter().copied().collect(),
            color: GROUPS[2],
            dashes: "10 3 2 3",
        },
    }
}

// Summed from the smallest term up, which loses least.
fn broken_stick(n_pieces: usize, n_wanted: usize, total: f64) -> Vec<f64> {
    let mut lengths = vec![0.0; n_pieces];
    let mut sum = 0.0;
    for piece in (1..=n_pieces).rev() {
        sum += 1.0 / piece as f64;
        lengths[piece - 1] = total * sum / n_pieces as f64;
    }
    lengths.truncate(n_wanted);
    lengths
}

#[cfg(test)]
mod tests {
    use super::broken_stick;

    #[test]
    fn the_stick_breaks_as_the_formula_says() {
        // For three pieces by hand: (1 + 1/2 + 1/3)/3, (1/2 + 1/3)/3, (1/3)/3.
        let lengths = broken_stick(3, 3, 1.0);
        for (found, expected) in lengths.iter().zip([11.0 / 18.0, 5.0 / 18.0, 2.0 / 18.0]) {
            assert!((found - expected).abs() < 1e-15);
        }
        assert!((broken_stick(14, 14, 14.0).iter().sum::<f64>() - 14.0).abs() < 1e-12);
        assert_eq!(broken_stick(14, 2, 14.0).len(), 2);
    }
}
