//! What a scree compares the variances with.

use super::palette::{GROUPS, INK_SOFT};
use super::settings::{Reference, Settings};
use super::source::Source;
use crate::exhibit::numbers::{grouped, stored};
use crate::parallel::ParallelAnalysis;

/// A reference as it is drawn: one value for each component.
pub(super) struct Line {
    pub name: String,
    pub values: Vec<f64>,
    pub color: &'static str,
    pub dashes: &'static str,
}

/// An interval for each of the leading variances, as it is drawn.
pub(super) struct Band {
    pub words: String,
    pub ends: Vec<(f64, f64)>,
}

/// The lines that were asked for, or the mean variance when nothing was.
pub(super) fn lines(source: &Source, settings: &Settings) -> Vec<Line> {
    let usual = [Reference::MeanVariance];
    let references = if settings.references.is_empty() { &usual[..] } else { &settings.references };
    references.iter().flat_map(|reference| lines_of(reference, source)).collect()
}

/// The intervals that were asked for.
pub(super) fn bands(settings: &Settings) -> Vec<Band> {
    let band = |low: &[f64], high: &[f64], words: String| Band {
        words,
        ends: low.iter().copied().zip(high.iter().copied()).collect(),
    };
    settings
        .references
        .iter()
        .filter_map(|reference| match reference {
            Reference::Band(given) => Some(band(&given.low, &given.high, given.words.clone())),
            Reference::Rules(retention) => retention.variance_bands().map(|bands| {
                let words = format!(
                    "the middle {} % of {} bootstrap samples",
                    stored(100.0 * bands.coverage(), 4),
                    grouped(bands.n_replicates())
                );
                band(bands.lower().as_slice(), bands.upper().as_slice(), words)
            }),
            _ => None,
        })
        .collect()
}

/// What a scree says about rules: how many of them keep how many components.
pub(super) fn notes(settings: &Settings) -> Vec<String> {
    let note = |reference: &Reference| {
        let Reference::Rules(retention) = reference else { return None };
        let counts: Vec<String> = retention
            .agreement()
            .iter()
            .map(|agreed| format!("{} ({})", agreed.n_components(), agreed.rules().len()))
            .collect();
        Some(format!(
            "Components kept, and by how many of the {} rules that apply: {}. No rule is the \
             truth.",
            retention.n_applying(),
            counts.join(", ")
        ))
    };
    settings.references.iter().filter_map(note).collect()
}

fn lines_of(reference: &Reference, source: &Source) -> Vec<Line> {
    let n_variables = source.variables.len();
    let mean = source.total_variance / n_variables as f64;
    match reference {
        Reference::MeanVariance => vec![Line {
            name: format!("mean variance of the variables: {}", stored(mean, 4)),
            values: vec![mean; source.n_components()],
            color: INK_SOFT,
            dashes: "7 4",
        }],
        Reference::BrokenStick => vec![Line {
            name: "broken stick".to_owned(),
            values: broken_stick(n_variables, source.n_components(), source.total_variance),
            color: GROUPS[3],
            dashes: "2 3",
        }],
        Reference::Noise(analysis) => vec![noise(analysis)],
        Reference::Rules(retention) => {
            let mut lines = lines_of(&Reference::MeanVariance, source);
            lines.extend(lines_of(&Reference::BrokenStick, source));
            lines.extend(retention.normal_noise().map(noise));
            lines
        }
        Reference::Band(_) => Vec::new(),
    }
}

fn noise(analysis: &ParallelAnalysis) -> Line {
    Line {
        name: format!(
            "noise: percentile {} of {} tables",
            stored(analysis.percentile(), 4),
            grouped(analysis.n_replicates())
        ),
        values: analysis.noise_percentile().iter().copied().collect(),
        color: GROUPS[2],
        dashes: "10 3 2 3",
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
