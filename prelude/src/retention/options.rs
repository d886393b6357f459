//! What the rules are told, and how long they may take.

use super::rule::Rule;
use crate::error::{Error, Result};

/// How long the costly rules may take.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
#[non_exhaustive]
pub enum Effort {
    /// A rule that would take more than some 3e10 multiplications (about ten seconds) says so
    /// instead of answering.
    #[default]
    Usual,
    /// Every rule that applies answers, however long it takes.
    Full,
    /// Nothing is simulated, resampled or cross-validated.
    Formulas,
}

/// How the rules are applied. The defaults: a cumulative share of 0.8, tests at level 0.05, the
/// 95th percentile of noise, 500 replicates wherever something is drawn, seeded by the session.
///
/// ```
/// use semiaxis::retention::{Effort, RetentionOptions, Rule};
///
/// let options = RetentionOptions::new()
///     .share(0.9)
///     .effort(Effort::Full)
///     .without([Rule::Acceleration])
///     .seed(7);
/// assert_eq!(options.chosen_share(), 0.9);
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct RetentionOptions {
    share: f64,
    level: f64,
    percentile: f64,
    replicates: usize,
    effort: Effort,
    left_out: Vec<Rule>,
    assume_normal: bool,
    seed: Option<u64>,
}

impl Default for RetentionOptions {
    fn default() -> Self {
        RetentionOptions {
            share: 0.8,
            level: 0.05,
            percentile: 95.0,
            replicates: 500,
            effort: Effort::Usual,
            left_out: Vec::new(),
            assume_normal: false,
            seed: None,
        }
    }
}

impl RetentionOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// The share of the total variance to reach, above 0 and below 1.
    pub fn share(mut self, share: f64) -> Self {
        self.share = share;
        self
    }

    /// The level α of each test in a sequence, above 0 and below 0.5. Bootstrap intervals cover
    /// 1 − α.
    pub fn level(mut self, level: f64) -> Self {
        self.level = level;
        self
    }

    /// The percentile of noise that parallel analysis compares with, above 0 and below 100.
    pub fn percentile(mut self, percentile: f64) -> Self {
        self.percentile = percentile;
        self
    }

    /// How many tables are drawn for each kind of noise and for the bootstrap, from 20 to 1
    /// million.
    pub fn replicates(mut self, replicates: usize) -> Self {
        self.replicates = replicates;
        self
    }

    /// How long the costly rules may take.
    pub fn effort(mut self, effort: Effort) -> Self {
        self.effort = effort;
        self
    }

    /// Leaves rules out; what is left out before stays so.
    pub fn without(mut self, rules: impl IntoIterator<Item = Rule>) -> Self {
        self.left_out.extend(rules);
        self
    }

    /// Lets the tests of equal roots answer even where Mardia's kurtosis speaks against normal
    /// rows. Their p-values are then not to be trusted.
    pub fn assume_normal(mut self, assume: bool) -> Self {
        self.assume_normal = assume;
        self
    }

    /// The seed, instead of the session's.
    pub fn seed(mut self, seed: u64) -> Self {
        self.seed = Some(seed);
        self
    }

    /// The share of the total variance to reach.
    pub fn chosen_share(&self) -> f64 {
        self.share
    }

    /// The level of each test.
    pub fn chosen_level(&self) -> f64 {
        self.level
    }

    /// The percentile of noise.
    pub fn chosen_percentile(&self) -> f64 {
        self.percentile
    }

    /// How many tables are drawn.
    pub fn n_replicates(&self) -> usize {
        self.replicates
    }

    /// How long the costly rules may take.
    pub fn chosen_effort(&self) -> Effort {
        self.effort
    }

    /// Whether a rule is left out.
    pub fn leaves_out(&self, rule: Rule) -> bool {
        self.left_out.contains(&rule)
    }

    /// Whether normal rows are taken for granted.
    pub fn assumes_normal(&self) -> bool {
        self.assume_normal
    }

    /// The seed, if one was given.
    pub fn chosen_seed(&self) -> Option<u64> {
        self.seed
    }

    pub(super) fn check(&self) -> Result<()> {
        let refuse =
            |option, value, accepted| Err(Error::OptionOutOfRange { option, value, accepted });
        if !(self.share > 0.0 && self.share < 1.0) {
            return refuse("share", self.share, "above 0 and below 1");
        }
        if !(self.level > 0.0 && self.level < 0.5) {
            return refuse("level", self.level, "above 0 and below 0.5");
        }
        if !(self.percentile > 0.0 && self.percentile < 100.0) {
            return refuse("percentile", self.percentile, "above 0 and below 100");
        }
        if !(20..=1_000_000).contains(&self.replicates) {
            return refuse("replicates", self.replicates as f64, "20 to 1000000");
        }
        Ok(())
    }
}
