//! How stability is looked into.

use std::fmt;

use crate::components::PrincipalComponents;
use crate::error::{Error, Result};

/// How the components of a resample are put beside those of the analysis.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
#[non_exhaustive]
pub enum Alignment {
    /// Each component of the analysis gets one component of the resample, so that the sum of the
    /// absolute congruences is as large as it can be (an optimal assignment), and its sign is
    /// chosen to agree.
    #[default]
    Matching,
    /// The leading components of the resample are rotated as a whole to lie as close as possible
    /// to those of the analysis (an orthogonal Procrustes rotation; P. H. Schönemann 1966). What
    /// is left is how far the subspace moves; turns within it are taken out.
    Procrustes,
}

/// How rows are resampled. The default is 2 000 resamples, confidence 0.95, components matched one
/// by one, seeded by the session, and as many components as have more than the mean variance.
///
/// ```
/// use semiaxis::stability::BootstrapOptions;
///
/// let options = BootstrapOptions::new().replicates(500).components(2).seed(7);
/// assert_eq!(options.n_replicates(), 500);
/// ```
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct BootstrapOptions {
    replicates: usize,
    components: Option<usize>,
    confidence: f64,
    alignment: Alignment,
    seed: Option<u64>,
}

impl Default for BootstrapOptions {
    fn default() -> Self {
        BootstrapOptions {
            replicates: 2000,
            components: None,
            confidence: 0.95,
            alignment: Alignment::Matching,
            seed: None,
        }
    }
}

impl BootstrapOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// The number of resamples, from 50 to 1 million.
    pub fn replicates(mut self, replicates: usize) -> Self {
        self.replicates = replicates;
        self
    }

    /// How many leading components are followed: their loadings, and the subspace they span.
    pub fn components(mut self, n_components: usize) -> Self {
        self.components = Some(n_components);
        self
    }

    /// The confidence of the intervals, above 0.5 and below 1.
    pub fn confidence(mut self, confidence: f64) -> Self {
        self.confidence = confidence;
        self
    }

    /// How the components of a resample are put beside those of the analysis.
    pub fn alignment(mut self, alignment: Alignment) -> Self {
        self.alignment = alignment;
        self
    }

    /// The seed, instead of the session's.
    pub fn seed(mut self, seed: u64) -> Self {
        self.seed = Some(seed);
        self
    }

    /// The number of resamples.
    pub fn n_replicates(&self) -> usize {
        self.replicates
    }

    /// How many components are followed, if that was chosen.
    pub fn chosen_components(&self) -> Option<usize> {
        self.components
    }

    /// The confidence of the intervals.
    pub fn chosen_confidence(&self) -> f64 {
        self.confidence
    }

    /// How components are put beside one another.
    pub fn chosen_alignment(&self) -> Alignment {
        self.alignment
    }

    /// The seed, if one was given.
    pub fn chosen_seed(&self) -> Option<u64> {
        self.seed
    }

    pub(super) fn check(&self) -> Result<()> {
        if !(50..=1_000_000).contains(&self.replicates) {
            return Err(Error::OptionOutOfRange {
                option: "replicates",
                value: self.replicates as f64,
                accepted: "50 to 1000000",
            });
        }
        check_confidence(self.confidence)
    }
}

/// What theory is asked for. The default is confidence 0.95.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct AsymptoticOptions {
    confidence: f64,
}

impl Default for AsymptoticOptions {
    fn default() -> Self {
        AsymptoticOptions { confidence: 0.95 }
    }
}

impl AsymptoticOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// The confidence of the intervals, above 0.5 and below 1.
    pub fn confidence(mut self, confidence: f64) -> Self {
        self.confidence = confidence;
        self
    }

    /// The confidence of the intervals.
    pub fn chosen_confidence(&self) -> f64 {
        self.confidence
    }

    pub(super) fn check(&self) -> Result<()> {
        check_confidence(self.confidence)
    }
}

/// What is followed while rows are left out. The default follows as many components as have more
/// than the mean variance.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct LeaveOutOptions {
    components: Option<usize>,
}

impl LeaveOutOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// How many leading components are followed: their variances and loadings, and the subspace
    /// they span.
    pub fn components(mut self, n_components: usize) -> Self {
        self.components = Some(n_components);
        self
    }

    /// How many components are followed, if that was chosen.
    pub fn chosen_components(&self) -> Option<usize> {
        self.components
    }
}

/// The number of components to follow: the one chosen, else as many as have more than the mean
/// variance, at least one.
pub(super) fn followed(chosen: Option<usize>, pca: &PrincipalComponents) -> Result<usize> {
    let available = pca.n_components();
    match chosen {
        Some(asked) if !(1..=available).contains(&asked) => {
            Err(Error::ComponentOutOfRange { asked, available })
        }
        Some(asked) => Ok(asked),
        None => {
            let mean = pca.total_variance() / pca.n_variables() as f64;
            Ok(pca.variances().iter().filter(|variance| **variance > mean).count().max(1))
        }
    }
}

fn check_confidence(confidence: f64) -> Result<()> {
    if confidence > 0.5 && confidence < 1.0 {
        return Ok(());
    }
    Err(Error::OptionOutOfRange {
        option: "confidence",
        value: confidence,
        accepted: "above 0.5 and below 1",
    })
}

impl fmt::Display for Alignment {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Alignment::Matching => "components matched one by one by congruence",
            Alignment::Procrustes => "leading components rotated together onto those of the data",
        })
    }
}
