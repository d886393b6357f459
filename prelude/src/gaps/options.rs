//! How missing cells are estimated, and from how many components.

use std::fmt;

use crate::components::Scaling;
use crate::error::{Error, Result};

/// The way in which components are fitted to a table with holes.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
#[non_exhaustive]
pub enum GapMethod {
    /// Probabilistic components by maximum likelihood (Tipping and Bishop 1999), each row judged
    /// by what it shows. Scales are those of the observed cells. The default.
    #[default]
    Probabilistic,
    /// Iterative components with shrunken singular values (Josse and Husson 2012). Scales follow
    /// the filled matrix.
    Shrunken,
    /// Iterative components without shrinkage: least squares on the observed cells. It follows
    /// noise closely where much is missing or many components are kept; for comparison.
    LeastSquares,
}

/// What decides the number of components.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[non_exhaustive]
pub enum ComponentRule {
    /// The analyst.
    Given(usize),
    /// The smallest error for observed cells that were hidden, each once, in so many parts.
    CrossValidated {
        /// The number of parts, from 2 to 100.
        folds: usize,
    },
    /// The smallest generalised cross-validation error, which hides nothing and so is quick:
    /// squared residuals of the observed cells, raised for what was fitted (J. Josse and
    /// F. Husson (2012), "Selecting the number of components in principal component analysis
    /// using cross-validation approximations", CSDA 56, 1869–1879).
    Generalised,
}

/// How missing cells are estimated. The default: probabilistic components of the correlation
/// matrix, their number by cross-validation in 5 parts among 0 to 8, tolerance 1e-7, at most 2 000
/// iterations, no random starts, no draws, seeded by the session.
///
/// ```
/// use semiaxis::gaps::{ComponentRule, GapMethod, GapOptions};
///
/// let options = GapOptions::new().method(GapMethod::Shrunken).components(2).draws(20).seed(7);
/// assert_eq!(options.chosen_rule(), ComponentRule::Given(2));
/// assert_eq!(options.n_draws(), 20);
/// ```
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct GapOptions {
    settings: Settings,
    rule: ComponentRule,
    most_components: Option<usize>,
    draws: usize,
    seed: Option<u64>,
}

/// How [`probabilistic_components`](super::probabilistic_components) are fitted. The default:
/// correlation scaling, tolerance 1e-7, at most 2 000 iterations, no random starts, seeded by the
/// session.
///
/// ```
/// use semiaxis::components::Scaling;
/// use semiaxis::gaps::ProbabilisticOptions;
///
/// let options = ProbabilisticOptions::new().scaling(Scaling::Covariance).random_starts(5).seed(3);
/// assert_eq!(options.n_random_starts(), 5);
/// ```
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ProbabilisticOptions {
    settings: Settings,
    seed: Option<u64>,
}

/// What a single fit depends on.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Settings {
    pub(super) method: GapMethod,
    pub(super) scaling: Scaling,
    pub(super) iterations: usize,
    pub(super) tolerance: f64,
    pub(super) random_starts: usize,
}

const DEFAULT: Settings = Settings {
    method: GapMethod::Probabilistic,
    scaling: Scaling::Correlation,
    iterations: 2000,
    tolerance: 1e-7,
    random_starts: 0,
};

/// Numbers of components that are tried when nothing else is said.
const MOST_TRIED: usize = 8;

impl Default for GapOptions {
    fn default() -> Self {
        GapOptions {
            settings: DEFAULT,
            rule: ComponentRule::CrossValidated { folds: 5 },
            most_components: None,
            draws: 0,
            seed: None,
        }
    }
}

impl GapOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// How components are fitted.
    pub fn method(mut self, method: GapMethod) -> Self {
        self.settings.method = method;
        self
    }

    /// Whether all variables weigh the same or by their variance.
    pub fn scaling(mut self, scaling: Scaling) -> Self {
        self.settings.scaling = scaling;
        self
    }

    /// This many components, at least 1 and fewer than both variables and rows less one.
    pub fn components(self, n_components: usize) -> Self {
        self.components_by(ComponentRule::Given(n_components))
    }

    /// The number of components by a rule.
    pub fn components_by(mut self, rule: ComponentRule) -> Self {
        self.rule = rule;
        self
    }

    /// The largest number of components that a rule may try; 0 components, which stand for the
    /// means of the columns, are always tried.
    pub fn most_components(mut self, most_components: usize) -> Self {
        self.most_components = Some(most_components);
        self
    }

    /// The most iterations of one fit, from 1 to 1 million.
    pub fn iterations(mut self, iterations: usize) -> Self {
        self.settings.iterations = iterations;
        self
    }

    /// The largest change at which a fit ends, above 0 and at most 0.01: of a loading or mean in
    /// standard deviations and of the logarithm of the noise (probabilistic), or of an estimated
    /// cell in standard deviations of its column (iterative). Fits that only serve to choose the
    /// number of components end at 1e-4 where this is smaller.
    pub fn tolerance(mut self, tolerance: f64) -> Self {
        self.settings.tolerance = tolerance;
        self
    }

    /// Fits from random starts besides the plain one, up to 1 000; the best counts.
    pub fn random_starts(mut self, random_starts: usize) -> Self {
        self.settings.random_starts = random_starts;
        self
    }

    /// Completed tables that are drawn besides the one with the expected values, up to 10 000.
    pub fn draws(mut self, draws: usize) -> Self {
        self.draws = draws;
        self
    }

    /// The seed, instead of the session's.
    pub fn seed(mut self, seed: u64) -> Self {
        self.seed = Some(seed);
        self
    }

    /// How components are fitted.
    pub fn chosen_method(&self) -> GapMethod {
        self.settings.method
    }

    /// What decides the number of components.
    pub fn chosen_rule(&self) -> ComponentRule {
        self.rule
    }

    /// The number of completed tables that are drawn.
    pub fn n_draws(&self) -> usize {
        self.draws
    }

    pub(super) fn settings(&self) -> &Settings {
        &self.settings
    }

    pub(super) fn seed_or_drawn(&self) -> u64 {
        self.seed.unwrap_or_else(crate::live::seed)
    }

    /// The largest number of components to try where up to `available` can be fitted.
    pub(super) fn most_tried(&self, available: usize) -> Result<usize> {
        match self.most_components {
            None => Ok(available.min(MOST_TRIED)),
            Some(asked) if (1..=available).contains(&asked) => Ok(asked),
            Some(asked) => Err(Error::ComponentOutOfRange { asked, available }),
        }
    }

    pub(super) fn check(&self) -> Result<()> {
        self.settings.check()?;
        if let ComponentRule::CrossValidated { folds } = self.rule {
            whole("folds", folds, 2, 100, "2 to 100")?;
        }
        whole("draws", self.draws, 0, 10_000, "0 to 10000")
    }
}

impl Default for ProbabilisticOptions {
    fn default() -> Self {
        ProbabilisticOptions { settings: DEFAULT, seed: None }
    }
}

impl ProbabilisticOptions {
    /// The default choices.
    pub fn new() -> Self {
        Self::default()
    }

    /// Whether all variables weigh the same or by their variance.
    pub fn scaling(mut self, scaling: Scaling) -> Self {
        self.settings.scaling = scaling;
        self
    }

    /// The most iterations, from 1 to 1 million.
    pub fn iterations(mut self, iterations: usize) -> Self {
        self.settings.iterations = iterations;
        self
    }

    /// The largest change of a loading or mean in standard deviations, and of the logarithm of the
    /// noise, at which the iteration ends: above 0 and at most 0.01.
    pub fn tolerance(mut self, tolerance: f64) -> Self {
        self.settings.tolerance = tolerance;
        self
    }

    /// Fits from random starts besides the plain one, up to 1 000; the likeliest counts.
    pub fn random_starts(mut self, random_starts: usize) -> Self {
        self.settings.random_starts = random_starts;
        self
    }

    /// The seed of the random starts, instead of the session's.
    pub fn seed(mut self, seed: u64) -> Self {
        self.seed = Some(seed);
        self
    }

    /// The number of random starts.
    pub fn n_random_starts(&self) -> usize {
        self.settings.random_starts
    }

    pub(super) fn settings(&self) -> &Settings {
        &self.settings
    }

    pub(super) fn seed_or_drawn(&self) -> u64 {
        self.seed.unwrap_or_else(crate::live::seed)
    }

    pub(super) fn check(&self) -> Result<()> {
        self.settings.check()
    }
}

impl Settings {
    fn check(&self) -> Result<()> {
        whole("iterations", self.iterations, 1, 1_000_000, "1 to 1000000")?;
        whole("random_starts", self.random_starts, 0, 1000, "0 to 1000")?;
        if !(self.tolerance > 0.0 && self.tolerance <= 0.01) {
            return Err(Error::OptionOutOfRange {
                option: "tolerance",
                value: self.tolerance,
                accepted: "above 0 and at most 0.01",
            });
        }
        Ok(())
    }
}

fn whole(
    option: &'static str,
    value: usize,
    least: usize,
    most: usize,
    accepted: &'static str,
) -> Result<()> {
    if (least..=most).contains(&value) {
        return Ok(());
    }
    Err(Error::OptionOutOfRange { option, value: value as f64, accepted })
}

impl fmt::Display for GapMethod {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            GapMethod::Probabilistic => "probabilistic components, maximum likelihood",
            GapMethod::Shrunken => "iterative components, shrunken",
            GapMethod::LeastSquares => "iterative components, least squares",
        })
    }
}

impl fmt::Display for ComponentRule {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            ComponentRule::Given(_) => f.write_str("as given"),
            ComponentRule::CrossValidated { folds } => {
                write!(f, "by cross-validation in {folds} parts")
            }
            ComponentRule::Generalised => f.write_str("by generalised cross-validation"),
        }
    }
}
