//! Parallel analyses as rules.

use super::subject::Subject;
use super::verdict::{Answer, Comparison, Criterion, Reason};
use crate::error::Result;
use crate::parallel::{Noise, ParallelAnalysis, ParallelOptions, RootsOf, parallel_analysis};

/// The three parallel analyses, or why there is none.
pub(super) struct Noises {
    pub(super) normal: std::result::Result<ParallelAnalysis, Reason>,
    pub(super) permuted: std::result::Result<ParallelAnalysis, Reason>,
    pub(super) shared: std::result::Result<ParallelAnalysis, Reason>,
}

/// Which threshold a rule takes from a parallel analysis.
#[derive(Clone, Copy)]
pub(super) enum Threshold {
    Mean,
    Percentile,
}

pub(super) fn run(
    subject: &Subject,
    noise: Noise,
    roots_of: RootsOf,
) -> Result<std::result::Result<ParallelAnalysis, Reason>> {
    if let Err(reason) = fits(subject, noise, roots_of) {
        return Ok(Err(reason));
    }
    let options = ParallelOptions::new()
        .replicates(subject.options.n_replicates())
        .percentile(subject.options.chosen_percentile())
        .noise(noise)
        .roots_of(roots_of)
        .seed(subject.seed);
    parallel_analysis(subject.pca.data(), options).map(Ok)
}

fn fits(subject: &Subject, noise: Noise, roots_of: RootsOf) -> std::result::Result<(), Reason> {
    subject.needs_correlation()?;
    subject.needs_equal_rows()?;
    subject.needs_components(2)?;
    if roots_of == RootsOf::ReducedCorrelation {
        subject.needs_more_rows()?;
        subject.needs_full_rank()?;
    }
    let (n, p) = (subject.n as f64, subject.p as f64);
    let side = n.min(p);
    let rows = if noise == Noise::Normal { side } else { n };
    // A shuffle or a normal number costs some ten multiplications.
    let one = rows * p * (side + 10.0) + 5.0 * side.powi(3);
    subject.needs_time(subject.options.n_replicates() as f64 * one)
}

pub(super) fn rule(
    analysis: &std::result::Result<ParallelAnalysis, Reason>,
    threshold: Threshold,
) -> Answer {
    let analysis = analysis.as_ref().map_err(Reason::clone)?;
    let limits = match threshold {
        Threshold::Mean => analysis.noise_mean(),
        Threshold::Percentile => analysis.noise_percentile(),
    };
    let what = match analysis.roots_of() {
        RootsOf::Correlation => "variance",
        RootsOf::ReducedCorrelation => "root",
    };
    let values = analysis.observed().as_slice().to_vec();
    Ok(Comparison::new(what, Criterion::Above, values, limits.as_slice().to_vec()))
}
