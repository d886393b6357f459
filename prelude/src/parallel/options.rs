//! How much noise is drawn, and of what kind.

use std::fmt;

use crate::error::{Error, Result};

/// What the tables without structure are made of.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
#[non_exhaustive]
pub enum Noise {
    /// Independent normal values. Their cross-product is drawn directly (Bartlett's
    /// decomposition), so the cost does not grow with the number of rows.
    #[default]
    Normal,
    /// Each column of the data, shuffled by itself: the columns keep their distributions and
    /// lose their connections. The way to go when variables are far from normal.
    Permuted,
}

/// Which matrix has its roots compared.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
#[non_exhaustive]
pub enum RootsOf {
    /// The correlation matrix: its roots are the variances of components.
    #[default]
    Correlation,
    /// The reduced correlation matrix: the diagonal holds the squared multiple correlation of each
    /// variable with all others instead of one, so that only what variables share is counted
    /// (L. G. Humphreys and D. R. Ilgen (1969), "Note on a criterion for the number of common
    /// factors", Educational and Psychological Measurement 29, 571–578). Some of its roots are
    /// negative. It takes more rows than variables.
    ReducedCorrelation,
}

/// How a parallel analysis is made. The default is 1 000 tables of normal noise, percentile 95,
/// the roots of the correlation matrix, seeded by the session.
///
/// ```
/// use semiaxis::parallel::{Noise, ParallelOptions};
///
/// let options = ParallelOptions::default().noise(Noise::Permuted).replicates(500).seed(7);
/// assert_eq!(options.n_replicates(), 500);
/// ```
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ParallelOptions {
    replicates: usize,
    percentile: f64,
    noise: Noise,
    roots_of: RootsOf,
    seed: Option<u64>,
}

impl Default for ParallelOptions {
    fn default() -> Self {
        ParallelOptions {
            replicates: 1000,
            percentile: 95.0,
            noise: Noise::Normal,
            roots_of: RootsOf::Correlation,
            seed: None,
        }
    }
}

impl ParallelOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// The number of tables without structure, from 20 to 1 million.
    pub fn replicates(mut self, replicates: usize) -> Self {
        self.replicates = replicates;
        self
    }

    /// The percentile for Glorfeld's rule, above 0 and below 100.
    pub fn percentile(mut self, percentile: f64) -> Self {
        self.percentile = percentile;
        self
    }

    /// What the tables are made of.
    pub fn noise(mut self, noise: Noise) -> Self {
        self.noise = noise;
        self
    }

    /// Which matrix has its roots compared.
    pub fn roots_of(mut self, roots_of: RootsOf) -> Self {
        self.roots_of = roots_of;
        self
    }

    /// The seed, instead of the session's.
    pub fn seed(mut self, seed: u64) -> Self {
        self.seed = Some(seed);
        self
    }

    /// The number of tables.
    pub fn n_replicates(&self) -> usize {
        self.replicates
    }

    /// The percentile of Glorfeld's rule.
    pub fn chosen_percentile(&self) -> f64 {
        self.percentile
    }

    /// What the tables are made of.
    pub fn chosen_noise(&self) -> Noise {
        self.noise
    }

    /// Which matrix has its roots compared.
    pub fn chosen_roots(&self) -> RootsOf {
        self.roots_of
    }

    /// The seed, if one was given.
    pub fn chosen_seed(&self) -> Option<u64> {
        self.seed
    }

    pub(super) fn check(&self) -> Result<()> {
        if !(20..=1_000_000).contains(&self.replicates) {
            return Err(Error::OptionOutOfRange {
                option: "replicates",
                value: self.replicates as f64,
                accepted: "20 to 1000000",
            });
        }
        if !(self.percentile > 0.0 && self.percentile < 100.0) {
            return Err(Error::OptionOutOfRange {
                option: "percentile",
                value: self.percentile,
                accepted: "above 0 and below 100",
            });
        }
        Ok(())
    }
}

impl fmt::Display for RootsOf {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            RootsOf::Correlation => "correlation matrix",
            RootsOf::ReducedCorrelation => "reduced correlation matrix",
        })
    }
}

impl fmt::Display for Noise {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Noise::Normal => "normal noise",
            Noise::Permuted => "permuted columns",
        })
    }
}
