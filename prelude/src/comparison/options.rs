//! How configurations are laid on one another.

use crate::error::{Error, Result};

/// What a Procrustes comparison may do besides turning and reflecting. By default nothing, which is
/// the choice for loadings; [`for_scores`](Self::for_scores) shifts and stretches as well.
///
/// ```
/// use semiaxis::comparison::ProcrustesOptions;
///
/// assert!(!ProcrustesOptions::new().has_scaling());
/// assert!(ProcrustesOptions::for_scores().has_translation());
/// ```
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct ProcrustesOptions {
    translation: bool,
    scaling: bool,
}

impl ProcrustesOptions {
    /// Turning and reflecting only.
    pub fn new() -> Self {
        Self::default()
    }

    /// Shifting and stretching as well: for configurations of units, such as scores.
    pub fn for_scores() -> Self {
        ProcrustesOptions { translation: true, scaling: true }
    }

    /// Whether the second configuration may be shifted.
    pub fn translation(mut self, translation: bool) -> Self {
        self.translation = translation;
        self
    }

    /// Whether the second configuration may be stretched or shrunk as a whole.
    pub fn scaling(mut self, scaling: bool) -> Self {
        self.scaling = scaling;
        self
    }

    /// Whether the second configuration may be shifted.
    pub fn has_translation(&self) -> bool {
        self.translation
    }

    /// Whether the second configuration may be stretched or shrunk as a whole.
    pub fn has_scaling(&self) -> bool {
        self.scaling
    }
}

/// How a test of association permutes. The default is 999 permutations, seeded by the session.
///
/// ```
/// use semiaxis::comparison::ProcrustesTestOptions;
///
/// assert_eq!(ProcrustesTestOptions::new().permutations(4999).n_permutations(), 4999);
/// ```
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct ProcrustesTestOptions {
    permutations: usize,
    seed: Option<u64>,
}

impl Default for ProcrustesTestOptions {
    fn default() -> Self {
        ProcrustesTestOptions { permutations: 999, seed: None }
    }
}

impl ProcrustesTestOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// The number of permutations, from 99 to 10 million.
    pub fn permutations(mut self, permutations: usize) -> Self {
        self.permutations = permutations;
        self
    }

    /// The seed, instead of the session's.
    pub fn seed(mut self, seed: u64) -> Self {
        self.seed = Some(seed);
        self
    }

    /// The number of permutations.
    pub fn n_permutations(&self) -> usize {
        self.permutations
    }

    /// The seed, if one was given.
    pub fn chosen_seed(&self) -> Option<u64> {
        self.seed
    }

    pub(super) fn check(&self) -> Result<()> {
        if (99..=10_000_000).contains(&self.permutations) {
            return Ok(());
        }
        Err(Error::OptionOutOfRange {
            option: "permutations",
            value: self.permutations as f64,
            accepted: "99 to 10000000",
        })
    }
}
